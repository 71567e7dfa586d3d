/**
 * Numbers as PostgreSQL writes an array, to be bound as text and cast (`?::float8[]`): quicker by far than leaving
 * each element to the driver. What is undefined becomes null.
 */
export function numberArray(numbers: readonly (number | undefined)[]): string {
  return `{${numbers.map((number) => number ?? 'null').join(',')}}`
}
