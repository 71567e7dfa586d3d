import { readdirSync, readFileSync } from 'node:fs'

/** `/proc` counts in hundredths of a second on every Linux that Node runs on. */
const ticksPerSecond = 100

/** CPU time that a process has had, in seconds; 0 once it is gone. */
export function cpuSeconds(pid: number): number {
  const fields = statOf(pid)
  return (Number(fields?.[11] ?? 0) + Number(fields?.[12] ?? 0)) / ticksPerSecond
}

/** CPU time of a process's living children together, in seconds. */
export function childrensCpuSeconds(pid: number): number {
  let sum = 0
  for (const name of readdirSync('/proc')) {
    if (/^\d+$/.test(name) && statOf(Number(name))?.[1] === String(pid)) sum += cpuSeconds(Number(name))
  }
  return sum
}

/** The fields of `/proc/PID/stat` from the third on: the second, its name in brackets, may hold blanks. */
function statOf(pid: number): string[] | undefined {
  try {
    const text = readFileSync(`/proc/${pid}/stat`, 'latin1')
    return text.slice(text.lastIndexOf(')') + 2).split(' ')
  } catch {
    return undefined
  }
}
