import type { Knex } from 'knex'
import type { Logger } from 'pino'
import type { Device } from '#shared/contract/device.ts'
import type { LiveChanges } from '#shared/contract/live.ts'
import { deviceRepository, type DeviceState } from './repository.ts'

export interface DeviceStates {
  /** Notes what is new of a device; it is written with that of the others, half a second later. */
  note: (deviceId: number, state: Partial<Omit<DeviceState, 'deviceId'>>) => void
  /** Pushes a site's devices where a probe of theirs was placed or taken out. */
  tellPlaces: (siteSlug: string) => Promise<void>
  /** Writes what is still unwritten. */
  stop: () => Promise<void>
}

const restMs = 500

/**
 * When a device was last heard, its battery, signal and connection: gathered, so that a reading does not cost an
 * update. The live rooms hear of what people look at, not of each sign of life.
 */
export function createDeviceStates({
  db,
  publish,
  log,
}: {
  db: Knex
  publish: (siteSlug: string, changes: LiveChanges) => void
  log: Logger
}): DeviceStates {
  const repository = deviceRepository(db)
  const told = new Map<number, string>()
  let unwritten = new Map<number, DeviceState>()
  let timer: NodeJS.Timeout | undefined
  let stopped = false

  function note(deviceId: number, state: Partial<Omit<DeviceState, 'deviceId'>>): void {
    merge(unwritten, deviceId, state)
    if (!stopped) timer ??= setTimeout(() => void flush(), restMs)
  }

  async function flush(): Promise<void> {
    const states = unwritten
    unwritten = new Map()
    try {
      await repository.saveStates([...states.values()])
      await tell([...states.values()])
    } catch (error) {
      log.debug({ err: error }, 'The state of devices could not be written; it is kept')
      const newer = unwritten
      unwritten = states
      for (const [deviceId, state] of newer) merge(unwritten, deviceId, state)
    }
    timer = undefined
    if (unwritten.size > 0 && !stopped) timer = setTimeout(() => void flush(), restMs)
  }

  /** Pushes the devices of which something other than the time changed. */
  async function tell(states: readonly DeviceState[]): Promise<void> {
    const visible = states.filter(
      ({ batteryPercent, signalDbm, connection }) =>
        batteryPercent !== undefined || signalDbm !== undefined || connection !== undefined,
    )
    if (visible.length === 0) return
    const devices = await repository.withIds(visible.map(({ deviceId }) => deviceId))
    pushNews(devices)
  }

  function pushNews(devices: readonly Device[]): void {
    const news = devices.filter(isNews)
    for (const site of new Set(news.map((device) => device.site))) {
      publish(site, { devices: news.filter((device) => device.site === site) })
    }
  }

  function isNews({ id, connection, batteryPercent, signalDbm, channels }: Device): boolean {
    const places = channels.map(({ placedIn }) => (placedIn ? `${placedIn.kind} ${placedIn.id}` : ''))
    const face = [connection, batteryPercent, signalDbm, ...places].join()
    const isNew = told.get(id) !== face
    told.set(id, face)
    return isNew
  }

  async function tellPlaces(siteSlug: string): Promise<void> {
    try {
      pushNews(await repository.ofSiteNamed(siteSlug))
    } catch (error) {
      log.debug({ err: error }, 'Where probes are could not be told; the next snapshot has it')
    }
  }

  return {
    note,
    tellPlaces,
    stop: async () => {
      stopped = true
      clearTimeout(timer)
      if (unwritten.size > 0) await flush()
    },
  }
}

function merge(
  into: Map<number, DeviceState>,
  deviceId: number,
  state: Partial<Omit<DeviceState, 'deviceId'>>,
): void {
  const before = into.get(deviceId)
  into.set(deviceId, {
    deviceId,
    lastSeenAtMs: state.lastSeenAtMs ?? before?.lastSeenAtMs,
    batteryPercent: state.batteryPercent ?? before?.batteryPercent,
    signalDbm: state.signalDbm ?? before?.signalDbm,
    connection: state.connection ?? before?.connection,
  })
}
