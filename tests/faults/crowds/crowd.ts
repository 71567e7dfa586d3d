import { fork } from 'node:child_process'
import { once } from 'node:events'
import { setPriority } from 'node:os'
import { fileURLToPath } from 'node:url'
import { CrowdCounts, type CrowdPlan } from './crowd-plan.ts'

/** Clients that are a burden, in a process of their own. */
export interface Crowd {
  counts: () => CrowdCounts
  stop: () => Promise<void>
}

/** Behind everyone else on a machine of two cores: what is measured is the server, not the crowd's own work. */
const niceness = 10

/** Starts a crowd; resolves once it stands as planned. */
export async function startCrowd(plan: CrowdPlan): Promise<Crowd> {
  const child = fork(fileURLToPath(new URL('./crowd-process.ts', import.meta.url)), {
    execArgv: ['--import', 'tsx'],
  })
  const left = once(child, 'exit')
  if (child.pid !== undefined) setPriority(child.pid, niceness)
  let counts: CrowdCounts = { ready: false, connected: 0, lost: 0, sent: 0 }
  const ready = new Promise<void>((resolve, reject) => {
    child.on('message', (message) => {
      counts = CrowdCounts.parse(message)
      if (counts.ready) resolve()
    })
    void left.then(() => reject(new Error('The process of the crowd has ended.')))
  })
  child.send(plan)
  await ready
  return {
    counts: () => counts,
    stop: async () => {
      child.kill('SIGKILL')
      await left
    },
  }
}
