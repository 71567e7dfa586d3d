/** A device that has signed in. */
export interface SignedInDevice {
  deviceId: number
  username: string
  deviceSlug: string
  siteId: number
  siteSlug: string
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

export type DeviceStatus = 'online' | 'offline'
