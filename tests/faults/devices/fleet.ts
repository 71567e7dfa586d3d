import { fork } from 'node:child_process'
import { once } from 'node:events'
import { fileURLToPath } from 'node:url'
import { z } from 'zod'
import type { BoxPlan } from './plan.ts'
import { Answer, Delays, Finished, FleetCounts, type FleetOrder } from './protocol.ts'

/** Probe boxes in a process of their own. */
export interface Fleet {
  plans: readonly BoxPlan[]
  counts: () => Promise<FleetCounts>
  /** Resolves with the time of the next acknowledgement, milliseconds since 1970 UTC. */
  nextAcknowledgement: () => Promise<number>
  /** Delays of the messages that fall due within so many milliseconds from now. */
  measure: (forMs: number) => Promise<Delays>
  /** From now on `delays` are of what falls due from now on. */
  startMeasuring: () => Promise<void>
  delays: () => Promise<Delays>
  /** Ends the sampling and waits until everything is acknowledged. @returns samples of each box, a channel */
  finish: () => Promise<number[]>
  stop: () => Promise<void>
}

const nothing = z.null()

/** Starts the boxes of a plan on a server's port for devices. */
export async function startFleet(port: number, seed: string, plans: readonly BoxPlan[]): Promise<Fleet> {
  const child = fork(fileURLToPath(new URL('./fleet-process.ts', import.meta.url)), {
    execArgv: ['--import', 'tsx'],
  })
  const left = once(child, 'exit')
  const open = new Map<number, { resolve: (result: unknown) => void; reject: (error: Error) => void }>()
  let last = 0
  child.on('message', (message) => {
    const { id, result } = Answer.parse(message)
    open.get(id)?.resolve(result)
    open.delete(id)
  })
  void left.then(() => {
    for (const { reject } of open.values()) reject(new Error('The process of the boxes has ended.'))
  })

  async function ask<T>(order: FleetOrder, schema: z.ZodType<T>): Promise<T> {
    const id = ++last
    const result = await new Promise<unknown>((resolve, reject) => {
      open.set(id, { resolve, reject })
      child.send({ id, order })
    })
    return schema.parse(result)
  }

  await ask({ do: 'begin', port, seed, boxes: [...plans] }, nothing)
  const delays = () => ask({ do: 'delays' }, Delays)
  const startMeasuring = async () => {
    await ask({ do: 'measure' }, nothing)
  }
  return {
    plans,
    counts: () => ask({ do: 'counts' }, FleetCounts),
    nextAcknowledgement: () => ask({ do: 'next-acknowledgement' }, z.number()),
    measure: async (forMs) => {
      await startMeasuring()
      await new Promise((resolve) => setTimeout(resolve, forMs))
      return delays()
    },
    startMeasuring,
    delays,
    finish: async () => {
      const { due } = await ask({ do: 'finish' }, Finished)
      return due.map((messages, index) => {
        const { samplesPerMessage = 1, samples = null } = plans[index] ?? {}
        return Math.min(messages * samplesPerMessage, samples ?? Infinity)
      })
    },
    stop: async () => {
      if (child.connected) child.send({ id: ++last, order: { do: 'quit' } })
      const hurry = setTimeout(() => child.kill('SIGKILL'), 5_000)
      await left
      clearTimeout(hurry)
    },
  }
}
