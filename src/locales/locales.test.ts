import { describe, expect, it } from 'vitest'
import { en } from './en/index.ts'
import { es } from './es/index.ts'

describe('the texts', () => {
  const english = flatten(en)
  const spanish = flatten(es)

  it('are all there in Spanish', () => {
    expect([...english.keys()].filter((key) => !spanish.has(key))).toEqual([])
  })

  it('have nothing in Spanish that English lacks', () => {
    expect([...spanish.keys()].filter((key) => !english.has(key))).toEqual([])
  })

  it('name the same values in both languages', () => {
    const differing = [...english].filter(
      ([key, text]) => placeholders(text).join() !== placeholders(spanish.get(key) ?? '').join(),
    )
    expect(differing).toEqual([])
  })

  it('are not empty', () => {
    expect([...english, ...spanish].filter(([, text]) => text.trim() === '')).toEqual([])
  })
})

describe('flatten', () => {
  it('gives every text its path', () => {
    expect([...flatten({ a: { b: 'x' }, c: 'y' })]).toEqual([
      ['a.b', 'x'],
      ['c', 'y'],
    ])
  })
})

function flatten(texts: object, prefix = ''): Map<string, string> {
  const found = new Map<string, string>()
  const entries: [string, unknown][] = Object.entries(texts)
  for (const [key, value] of entries) {
    if (typeof value === 'string') found.set(prefix + key, value)
    else if (typeof value === 'object' && value !== null) {
      for (const [path, text] of flatten(value, `${prefix}${key}.`)) found.set(path, text)
    } else throw new TypeError(`${prefix}${key} is not a text`)
  }
  return found
}

/** The `{names}` of a text, each once, sorted; a plural's alternatives may repeat them. */
function placeholders(text: string): string[] {
  return [...new Set([...text.matchAll(/\{(\w+)\}/g)].map((match) => match[1] ?? ''))].sort()
}
