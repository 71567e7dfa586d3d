import type { Connection } from './connection.ts'
import type { DeviceStatus, SignedInDevice } from './device.ts'

/** Which devices are connected; one of them may be so more than once. */
export interface Presence {
  arrive: (connection: Connection) => void
  leave: (connection: Connection) => void
  /** Connections of devices that are signed in. */
  count: () => number
}

export function createPresence(onStatus: (device: SignedInDevice, status: DeviceStatus) => void): Presence {
  const connections = new Map<number, number>()
  let count = 0
  return {
    arrive: (connection) => {
      if (!connection.device || connection.present) return
      connection.present = true
      count++
      const { deviceId } = connection.device
      const others = connections.get(deviceId) ?? 0
      connections.set(deviceId, others + 1)
      if (others === 0) onStatus(connection.device, 'online')
    },
    leave: (connection) => {
      if (!connection.device || !connection.present) return
      connection.present = false
      count--
      const { deviceId } = connection.device
      const others = (connections.get(deviceId) ?? 1) - 1
      if (others > 0) connections.set(deviceId, others)
      else {
        connections.delete(deviceId)
        onStatus(connection.device, 'offline')
      }
    },
    count: () => count,
  }
}
