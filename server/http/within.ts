/** For whom only that it was late matters. */
export const tooLate = () => new Error('Too late.')

/** An answer, or the error of `late` when it takes longer; what comes after that is left. */
export function within<T>(ms: number, answer: Promise<T>, late: () => Error): Promise<T> {
  let timer: NodeJS.Timeout | undefined
  const tooLate = new Promise<never>((_, reject) => {
    timer = setTimeout(() => reject(late()), ms)
  })
  return Promise.race([answer, tooLate]).finally(() => clearTimeout(timer))
}
