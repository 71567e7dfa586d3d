/** A fault that the reader can mend: shown as its sentence, without a stack. */
export class SetupError extends Error {}

/**
 * Runs the steps in order and says of each what it does and how far it is. Stops at the first that fails.
 *
 * @param {{ title: string, run: (say: (text: string) => void) => Promise<string> }[]} steps
 *   each gets `say` for its progress and returns a closing word
 * @param {(line: string) => void} [print]
 * @returns {Promise<boolean>} whether all went well
 */
export async function runSteps(steps, print = console.log) {
  for (const [index, { title, run }] of steps.entries()) {
    const say = (text) => print(`[${index + 1}/${steps.length}] ${title}: ${text}`)
    try {
      say(await run(say))
    } catch (error) {
      say(error instanceof SetupError ? error.message : (error?.stack ?? String(error)))
      return false
    }
  }
  return true
}
