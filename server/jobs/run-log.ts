import type { Logger } from 'pino'
import type { JobKind } from '#shared/domain/job-schedule.ts'
import type { RunsToKeep } from '../features/jobs/service.ts'

export interface RunLogDeps {
  keep: (runs: readonly RunsToKeep[]) => Promise<void>
  log: Logger
  /** How long runs are gathered before they are written down, ms. */
  gatherMs?: number
}

/** Writes down how the jobs of this process went: a few hundred a minute, so gathered, and lost with the process. */
export function createRunLog({ keep, log, gatherMs = 1000 }: RunLogDeps) {
  let gathered = new Map<JobKind, RunsToKeep>()
  let timer: NodeJS.Timeout | undefined
  let writing: Promise<void> = Promise.resolve()

  function write(): Promise<void> {
    clearTimeout(timer)
    timer = undefined
    const runs = [...gathered.values()]
    gathered = new Map()
    writing = writing
      .then(() => keep(runs))
      .catch((error: unknown) => {
        log.warn({ err: error }, 'How the jobs went could not be written down')
      })
    return writing
  }

  return {
    /** @param ms how long a run took; `error` why it failed */
    note(kind: JobKind, ms: number, error?: unknown): void {
      const before = gathered.get(kind)
      gathered.set(kind, {
        kind,
        runs: (before?.runs ?? 0) + 1,
        failed: (before?.failed ?? 0) + (error === undefined ? 0 : 1),
        lastMs: ms,
        lastError: error === undefined ? (before?.lastError ?? null) : firstLine(error),
      })
      timer ??= setTimeout(() => void write(), gatherMs)
    },

    /** Writes down what is left. */
    stop: write,
  }
}

function firstLine(error: unknown): string {
  const [line = ''] = (error instanceof Error ? error.message : String(error)).split('\n')
  return line
}
