import type { Job } from './job.ts'

/** What a commit tells of a device: when it was heard last, and what it said of itself. */
export interface Heard {
  atMs: number
  batteryPercent: number | undefined
  signalDbm: number | undefined
}

/** Of a device's messages in one batch, the newest of everything. */
export function hear(heard: Map<number, Heard>, job: Job): void {
  const { sender, receivedAtMs: atMs, readings, batteryPercent, signalDbm } = job
  if (readings.length === 0 && batteryPercent === undefined && signalDbm === undefined) return
  const before = heard.get(sender.deviceId)
  if (!before) {
    heard.set(sender.deviceId, { atMs, batteryPercent, signalDbm })
    return
  }
  before.atMs = Math.max(before.atMs, atMs)
  before.batteryPercent = batteryPercent ?? before.batteryPercent
  before.signalDbm = signalDbm ?? before.signalDbm
}
