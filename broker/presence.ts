import { liveConnection, type Connection } from './connection.ts'
import type { DeviceStatus, LiveConnection, SignedInDevice } from './device.ts'

/** Which devices are connected; one of them may be so more than once. */
export interface Presence {
  arrive: (connection: Connection) => void
  leave: (connection: Connection) => void
  /** Connections of devices that are signed in. */
  count: () => number
  /** A device's connections, the oldest first. */
  of: (deviceId: number) => readonly Connection[]
  all: () => LiveConnection[]
}

/**
 * @param onStatus a device came, or has another newest connection, or went. It stays online as long as one connection
 *   of it is there, whatever the last wills of others say.
 */
export function createPresence(
  onStatus: (device: SignedInDevice, status: DeviceStatus, connection: LiveConnection) => void,
): Presence {
  const connections = new Map<number, Set<Connection>>()
  let count = 0

  const of = (deviceId: number) => [...(connections.get(deviceId) ?? [])]

  return {
    arrive: (connection) => {
      const { device } = connection
      if (!device || connection.present) return
      connection.present = true
      count++
      connections.set(device.deviceId, (connections.get(device.deviceId) ?? new Set()).add(connection))
      onStatus(device, 'online', liveConnection(connection, device))
    },
    leave: (connection) => {
      const { device } = connection
      if (!device || !connection.present) return
      connection.present = false
      count--
      const others = connections.get(device.deviceId)
      others?.delete(connection)
      const newest = of(device.deviceId).at(-1)
      if (newest) onStatus(device, 'online', liveConnection(newest, newest.device ?? device))
      else {
        connections.delete(device.deviceId)
        onStatus(device, 'offline', liveConnection(connection, device))
      }
    },
    count: () => count,
    of,
    all: () =>
      [...connections.values()].flatMap((ofDevice) =>
        [...ofDevice].flatMap((one) => (one.device ? [liveConnection(one, one.device)] : [])),
      ),
  }
}
