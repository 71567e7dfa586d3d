/** The time that a scenario takes, in ms: what is measured is what happens meanwhile. */
export function pause(ms: number): Promise<void> {
  return new Promise((resolve) => setTimeout(resolve, ms))
}
