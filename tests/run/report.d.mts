/** What Vitest's JSON report says: how many tests passed, and each fault in one line. */
export function readReport(
  file: string,
  root: string,
  expected: string[],
): { passed: number; faults: string[] }

/** Every test file of the repository, relative to root. */
export function testFilesUnder(root: string): string[]
