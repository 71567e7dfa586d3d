/** Topic of a device's readings: a SenML JSON pack, QoS 1. */
export function readingsTopic(site: string, device: string): string {
  return `coalhand/${site}/${device}/readings`
}

/** Topic of a device's retained status: `online` or, by last will, `offline`. */
export function statusTopic(site: string, device: string): string {
  return `coalhand/${site}/${device}/status`
}

/** What a topic of a device is about. */
export type DeviceTopic = { site: string; device: string; leaf: 'readings' | 'status' }

/** Reads a device's topic; undefined when it is not one. */
export function parseDeviceTopic(topic: string): DeviceTopic | undefined {
  const match = /^coalhand\/([a-z0-9-]+)\/([a-z0-9-]+)\/(readings|status)$/.exec(topic)
  const [, site, device, leaf] = match ?? []
  if (site === undefined || device === undefined) return undefined
  return leaf === 'readings' ? { site, device, leaf } : { site, device, leaf: 'status' }
}

/** Path of MQTT over WebSocket on the HTTP port, and the subprotocol that a client offers [MQTT-6.0.0-3]. */
export const mqttPath = '/mqtt'
export const mqttSubprotocol = 'mqtt'

/** The largest packet a device may send, in bytes; above it the connection is closed. */
export const maxPayloadBytes = 64 * 1024
