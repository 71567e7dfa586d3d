import { z } from 'zod'

/**
 * What a box sends: on each of its channels a sample every `periodMs` from `startMs` on (milliseconds since 1970 UTC),
 * so many samples a message. What was sent is thereby known without a list of it.
 */
export const BoxPlan = z.object({
  username: z.string(),
  secret: z.string(),
  topic: z.string(),
  clientId: z.string(),
  channels: z.int().positive(),
  startMs: z.int(),
  periodMs: z.int().positive(),
  samplesPerMessage: z.int().positive(),
  /** How many samples a channel has; null: one after the other as time goes by, until told to stop. */
  samples: z.int().nullable(),
  /** PUBLISH packets on the way at a time; what is due beyond them waits in the box. */
  window: z.int().positive(),
  keepAliveS: z.int(),
  /** Pause before coming back after a connection was lost, in ms; up to half of it more, by lot. */
  reconnectMs: z.int(),
})
export type BoxPlan = z.infer<typeof BoxPlan>

/** The value of a channel's sample, °C: all the sums are exact in binary, so that SQL comes to the same. */
export function valueOf(channel: number, sample: number): number {
  return 60 + ((sample * 7 + channel * 13) % 1024) / 16
}

/** How many messages carry the samples. */
export function messageCount({ samples, samplesPerMessage }: BoxPlan): number {
  return samples === null ? Infinity : Math.ceil(samples / samplesPerMessage)
}

/** A message as SenML: time, unit and the rest in the base of the first record. */
export function payloadOf(plan: BoxPlan, message: number): string {
  const first = message * plan.samplesPerMessage
  const end = Math.min(first + plan.samplesPerMessage, plan.samples ?? Infinity)
  const records: string[] = []
  for (let sample = first; sample < end; sample++) {
    const t = ((sample - first) * plan.periodMs) / 1000
    for (let channel = 1; channel <= plan.channels; channel++) {
      const base =
        records.length === 0 ? `"bt":${(plan.startMs + first * plan.periodMs) / 1000},"bu":"Cel",` : ''
      records.push(`{${base}"n":"${channel}","v":${valueOf(channel, sample)}${t === 0 ? '' : `,"t":${t}`}}`)
    }
  }
  return `[${records.join()}]`
}
