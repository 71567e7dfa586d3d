import { Agent, request } from 'node:http'
import { performance } from 'node:perf_hooks'

/** How long things took, ms. */
export interface Timings {
  note: (name: string, ms: number) => void
  /** The least time that a share of them (0 to 1) did not exceed. */
  quantile: (name: string, share: number) => number
}

export function createTimings(): Timings {
  const times = new Map<string, number[]>()
  return {
    note(name, ms) {
      const known = times.get(name)
      if (known) known.push(ms)
      else times.set(name, [ms])
    },
    quantile(name, share) {
      const sorted = (times.get(name) ?? []).toSorted((a, b) => a - b)
      return sorted[Math.max(0, Math.ceil(sorted.length * share) - 1)] ?? NaN
    },
  }
}

/** Does something and notes how long it took. */
export async function timed<T>(timings: Timings, name: string, work: () => Promise<T>): Promise<T> {
  const begun = performance.now()
  const result = await work()
  timings.note(name, performance.now() - begun)
  return result
}

/** Asks one server over a connection that stays open. */
export function createAsker(port: number, token: string) {
  const agent = new Agent({ keepAlive: true, maxSockets: 1 })
  return {
    /** The answer as it was parsed. @throws Error unless the status is 200 */
    get: (path: string): Promise<unknown> =>
      new Promise((resolve, reject) => {
        const headers = { authorization: `Bearer ${token}` }
        const sent = request({ host: '127.0.0.1', port, path, agent, headers }, (answer) => {
          const chunks: Buffer[] = []
          answer.on('data', (chunk: Buffer) => chunks.push(chunk))
          answer.on('error', reject)
          answer.on('end', () => {
            const text = Buffer.concat(chunks).toString('utf8')
            if (answer.statusCode !== 200) reject(new Error(`${path} answered ${answer.statusCode}: ${text}`))
            else resolve(JSON.parse(text))
          })
        })
        sent.on('error', reject)
        sent.end()
      }),
    close: () => agent.destroy(),
  }
}
