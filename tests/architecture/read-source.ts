import { posix } from 'node:path'
import ts from 'typescript'

/** One import of a file, as far as the rules ask. */
export interface Import {
  /** As written. */
  specifier: string
  /** The file within the repository that it names, or undefined for a package and for Node's own modules. */
  target: string | undefined
  /** Gone at run time. */
  typeOnly: boolean
  line: number
}

/** A place where a file reads something of the machine or marks a test, as dotted text: `process.env`. */
export interface Use {
  what: string
  line: number
}

/** What the rules know of a file. */
export interface Source {
  /** From the repository's folder, with `/`. */
  path: string
  lines: number
  imports: Import[]
  uses: Use[]
}

/** Reads a TypeScript, JavaScript or Vue file: a component counts with all its scripts. */
export function readSource(path: string, text: string): Source {
  const imports: Import[] = []
  const uses: Use[] = []
  const root = ts.createSourceFile(
    path,
    scriptOf(path, text),
    ts.ScriptTarget.Latest,
    false,
    ts.ScriptKind.TS,
  )
  const lineOf = (node: ts.Node) => root.getLineAndCharacterOfPosition(node.getStart(root)).line + 1
  const addImport = (node: ts.Node, name: ts.Node | undefined, typeOnly: boolean) => {
    if (name === undefined || !ts.isStringLiteralLike(name)) return
    imports.push({ specifier: name.text, target: resolve(path, name.text), typeOnly, line: lineOf(node) })
  }
  const visit = (node: ts.Node): void => {
    if (ts.isImportDeclaration(node)) addImport(node, node.moduleSpecifier, isTypeOnly(node.importClause))
    else if (ts.isExportDeclaration(node)) addImport(node, node.moduleSpecifier, node.isTypeOnly)
    else if (ts.isImportTypeNode(node)) {
      addImport(node, ts.isLiteralTypeNode(node.argument) ? node.argument.literal : undefined, true)
    } else if (ts.isCallExpression(node) && loads(node.expression)) addImport(node, node.arguments[0], false)
    else if (ts.isPropertyAccessExpression(node)) {
      const what = dotted(node)
      if (what !== undefined) uses.push({ what, line: lineOf(node) })
    } else if (ts.isNewExpression(node) && ts.isIdentifier(node.expression) && !node.arguments?.length) {
      uses.push({ what: `new ${node.expression.text}()`, line: lineOf(node) })
    } else if (ts.isCallExpression(node) && ts.isIdentifier(node.expression)) {
      uses.push({ what: `${node.expression.text}()`, line: lineOf(node) })
    }
    ts.forEachChild(node, visit)
  }
  visit(root)
  return { path, lines: text.trimEnd().split('\n').length, imports, uses }
}

/** A component's scripts in their own lines; everything around them blank. */
function scriptOf(path: string, text: string): string {
  if (!path.endsWith('.vue')) return text
  const blank = (part: string) => part.replaceAll(/[^\n]/g, ' ')
  let script = ''
  let from = 0
  for (const match of text.matchAll(/(<script\b[^>]*>)([\s\S]*?)<\/script>/g)) {
    const [, tag = '', body = ''] = match
    script += blank(text.slice(from, match.index + tag.length)) + body
    from = match.index + tag.length + body.length
  }
  return script
}

function isTypeOnly(clause: ts.ImportClause | undefined): boolean {
  if (clause === undefined) return false
  if (clause.phaseModifier === ts.SyntaxKind.TypeKeyword) return true
  const named = clause.namedBindings
  if (clause.name !== undefined || named === undefined || !ts.isNamedImports(named)) return false
  return named.elements.length > 0 && named.elements.every((element) => element.isTypeOnly)
}

/** `a.b.c` as text; undefined when something else than names is in it. */
function dotted(node: ts.Expression): string | undefined {
  if (ts.isIdentifier(node)) return node.text
  if (!ts.isPropertyAccessExpression(node)) return undefined
  const left = dotted(node.expression)
  return left === undefined ? undefined : `${left}.${node.name.text}`
}

function loads(callee: ts.Expression): boolean {
  return callee.kind === ts.SyntaxKind.ImportKeyword || (ts.isIdentifier(callee) && callee.text === 'require')
}

function resolve(from: string, specifier: string): string | undefined {
  if (specifier.startsWith('.')) return posix.join(posix.dirname(from), specifier)
  if (specifier.startsWith('#shared/')) return `src/shared/${specifier.slice('#shared/'.length)}`
  if (specifier.startsWith('@/')) return `src/${specifier.slice('@/'.length)}`
  return undefined
}
