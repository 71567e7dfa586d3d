import type { SensorSpan } from '#shared/domain/sensor.ts'

/** Who sent something: a device that has shown its secret. */
export interface Sender {
  deviceId: number
  siteSlug: string
}

/** A device's channel with the sensors that have hung on it. */
export interface KnownChannel {
  id: number
  sensors: readonly SensorSpan[]
}

/** A device's channels by their number. */
export type KnownChannels = ReadonlyMap<number, KnownChannel>

/** Where the ingest looks up channels. */
export interface ChannelSource {
  /** What is in memory, without waiting. */
  known: (deviceId: number) => KnownChannels | undefined
  /** Asks the database, if it was not asked for this device just before. */
  load: (deviceId: number) => Promise<KnownChannels>
}
