/** A device that has signed in. */
export interface SignedInDevice {
  deviceId: number
  username: string
  deviceSlug: string
  siteId: number
  siteSlug: string
  /** Which of its secrets it gave. */
  secretId?: number | undefined
}

/** Where a connection comes from. */
export interface Origin {
  transport: 'mqtt' | 'websocket'
  remoteAddress: string
}

/** A device's connection, as others are told of it. */
export interface LiveConnection extends Origin {
  device: SignedInDevice
  /** As the device gave it. */
  clientId: string
}

/** What a device published under its own topic. */
export interface DeviceMessage {
  device: SignedInDevice
  topic: string
  payload: Buffer
}

/** What a device tried and may not do: its connection was closed for it. */
export interface Refusal {
  device: SignedInDevice
  topic: string
  reason: 'foreign-topic' | 'too-large'
  /** In words. */
  detail: string
  /** The beginning of what was sent. */
  payload: Buffer
}

/** Why a device's connection ended other than by its own DISCONNECT. */
export type Ending =
  'malformed' | 'lost' | 'silent' | 'not-reading' | 'taken-over' | 'too-many-connections' | 'secret-ended'

/** A connection ended badly. */
export interface Trouble {
  device: SignedInDevice
  kind: Ending
  /** In words. */
  detail: string
  remoteAddress: string
}

export type DeviceStatus = 'online' | 'offline'
