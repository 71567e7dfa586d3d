import { readFileSync } from 'node:fs'

export interface MemoryWatch {
  /** Resident memory at the start and the highest since, in megabytes (10⁶ bytes). */
  figures: () => { before: number; highest: number; last: number }
  stop: () => void
}

const everyMs = 200

/** Watches a process's resident memory. @param pid asked anew each time, as a server may be restarted */
export function watchMemory(pid: () => number): MemoryWatch {
  const before = residentMegabytes(pid())
  let last = before
  let highest = before
  const timer = setInterval(() => {
    last = residentMegabytes(pid())
    highest = Math.max(highest, last)
  }, everyMs)
  return { figures: () => ({ before, highest, last }), stop: () => clearInterval(timer) }
}

/** 0 when there is no such process. */
function residentMegabytes(pid: number): number {
  try {
    const [, kibibytes = '0'] = /VmRSS:\s*(\d+) kB/.exec(readFileSync(`/proc/${pid}/status`, 'utf8')) ?? []
    return (Number(kibibytes) * 1024) / 1e6
  } catch {
    return 0
  }
}
