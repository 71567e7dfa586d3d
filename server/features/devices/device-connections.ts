import type { Knex } from 'knex'
import type { Logger } from 'pino'
import type { Broker } from '../../../broker/broker.ts'
import type { LiveConnection, Origin } from '../../../broker/device.ts'
import type { Device, DeviceErrorKind, DeviceStatus, RejectionReason } from '#shared/contract/device.ts'
import type { IngestOutcome } from '#shared/contract/reading.ts'
import type { Clock } from '#shared/domain/clock.ts'
import type { z } from 'zod'
import { connectionRows, type ConnectionFacts, type ErrorFacts } from './connection-rows.ts'
import { secretRows } from './secret-rows.ts'
import { statusOf } from './status-of.ts'

type Outcome = z.infer<typeof IngestOutcome>
type Accept<Message> = (message: Message) => Promise<Outcome>

/** What went wrong with a device. */
export interface DeviceTrouble {
  kind: DeviceErrorKind
  reason?: RejectionReason | undefined
  detail: string
  remoteAddress?: string | undefined
}

/** How each device is connected, what it sent since, what went wrong last, and which secrets were used when. */
export interface DeviceConnections {
  /** A device came or went, or has another newest connection. */
  changed: (deviceId: number, isOnline: boolean, connection: LiveConnection) => void
  /** Counts what an ingest takes from each device; `transport` is for those that have no connection. */
  counting: <Message extends { device: { deviceId: number } }>(
    accept: Accept<Message>,
    transport?: 'http',
  ) => Accept<Message>
  signedIn: (device: { deviceId: number; secretId: number }, origin: DeviceOrigin) => void
  trouble: (deviceId: number, trouble: DeviceTrouble) => void
  /** Of devices of one site. Addresses are for those who may manage devices. */
  statuses: (devices: readonly Device[], options: { withAddresses: boolean }) => Promise<DeviceStatus[]>
  /** When a secret was used since the server started; not all of it need be written yet. */
  useOf: (secretId: number) => { firstMs: number; lastMs: number } | undefined
  /** Secrets that open connections were made with. */
  secretsInUse: () => ReadonlySet<number>
  /** Closes connections that were made with secrets which are good no more. */
  endSecrets: (secretIds: ReadonlySet<number>) => void
  /** Where connections are, once there is a broker. */
  attach: (broker: Pick<Broker, 'connections' | 'endSecrets'>) => void
  /** To call once at start, before any device connects. */
  endAll: () => Promise<void>
  /** Writes what is still unwritten. */
  stop: () => Promise<void>
}

/** Where a device signs in from. */
export interface DeviceOrigin {
  transport: Origin['transport'] | 'http'
  remoteAddress: string
}

/** How long what people look at may be unwritten, and counts and times of use, in ms. */
const soonMs = 500
const laterMs = 30_000

/** Keeps it in memory and writes it now and then, so that a message costs no statement. */
export function createDeviceConnections({
  db,
  clock,
  log,
}: {
  db: Knex
  clock: Clock
  log: Logger
}): DeviceConnections {
  const rows = connectionRows(db)
  const secrets = secretRows(db)
  const connections = new Map<number, ConnectionFacts>()
  const errors = new Map<number, ErrorFacts>()
  const uses = new Map<number, { firstMs: number; lastMs: number }>()
  /** Where devices without a connection were heard from. */
  const addresses = new Map<number, string>()
  let unwritten = nothing()
  let broker: Pick<Broker, 'connections' | 'endSecrets'> | undefined
  let timer: NodeJS.Timeout | undefined
  let dueInMs = Infinity
  let stopped = false

  function writeWithin(ms: number): void {
    if (stopped || ms >= dueInMs) return
    clearTimeout(timer)
    dueInMs = ms
    timer = setTimeout(() => void write(), ms)
  }

  async function write(): Promise<void> {
    dueInMs = Infinity
    timer = undefined
    const now = unwritten
    unwritten = nothing()
    try {
      await rows.saveConnections(pick(connections, now.connections))
      await rows.saveErrors(pick(errors, now.errors))
      await secrets.saveUses([...now.uses].flatMap((id) => ({ id, ...(uses.get(id) ?? neverUsed) })))
    } catch (error) {
      log.debug({ err: error }, 'How devices are connected could not be written; it is kept')
      for (const key of ['connections', 'errors', 'uses'] as const) {
        for (const id of now[key]) unwritten[key].add(id)
      }
      writeWithin(laterMs)
    }
  }

  function begin(deviceId: number, facts: Pick<ConnectionFacts, 'transport' | 'clientId' | 'remoteAddress'>) {
    const begun = { ...facts, sinceMs: clock.now(), endedAtMs: null, messages: 0, readings: 0, rejected: 0 }
    connections.set(deviceId, begun)
    unwritten.connections.add(deviceId)
    writeWithin(soonMs)
    return begun
  }

  function count(deviceId: number, { stored, rejected }: Outcome, transport: 'http' | undefined): void {
    let facts = connections.get(deviceId)
    if (transport && facts?.endedAtMs !== null) {
      facts = begin(deviceId, { transport, clientId: null, remoteAddress: addresses.get(deviceId) ?? null })
    }
    const [first] = rejected
    if (first) trouble(deviceId, { kind: 'refused-message', ...first })
    if (!facts) return
    facts.messages++
    facts.readings += stored
    facts.rejected += rejected.length
    unwritten.connections.add(deviceId)
    writeWithin(laterMs)
  }

  function trouble(deviceId: number, { kind, reason, detail, remoteAddress }: DeviceTrouble): void {
    errors.set(deviceId, {
      atMs: clock.now(),
      kind,
      reason: reason ?? null,
      detail,
      remoteAddress: remoteAddress ?? null,
    })
    unwritten.errors.add(deviceId)
    writeWithin(soonMs)
  }

  return {
    changed: (deviceId, isOnline, { transport, clientId, remoteAddress }) => {
      const facts = connections.get(deviceId)
      const lasts = facts !== undefined && facts.endedAtMs === null && facts.transport !== 'http'
      if (!isOnline) {
        if (lasts) facts.endedAtMs = clock.now()
      } else if (lasts) Object.assign(facts, { transport, clientId, remoteAddress })
      else begin(deviceId, { transport, clientId, remoteAddress })
      unwritten.connections.add(deviceId)
      writeWithin(soonMs)
    },
    counting: (accept, transport) => (message) =>
      accept(message).then((outcome) => {
        count(message.device.deviceId, outcome, transport)
        return outcome
      }),
    signedIn: ({ deviceId, secretId }, { transport, remoteAddress }) => {
      if (transport === 'http') addresses.set(deviceId, remoteAddress)
      const nowMs = clock.now()
      const use = uses.get(secretId)
      if (use) use.lastMs = nowMs
      else uses.set(secretId, { firstMs: nowMs, lastMs: nowMs })
      unwritten.uses.add(secretId)
      writeWithin(use ? laterMs : soonMs)
    },
    trouble,
    statuses: async (devices, options) => {
      const written = await rows.of(devices.map(({ id }) => id))
      return devices.map((device) => {
        const known = written.get(device.id)
        const connection = connections.get(device.id)
        const error = errors.get(device.id) ?? known?.error
        return statusOf(device, { now: connection, then: known?.connection, error }, options)
      })
    },
    useOf: (secretId) => uses.get(secretId),
    secretsInUse: () => new Set(broker?.connections().flatMap(({ device }) => device.secretId ?? []) ?? []),
    endSecrets: (secretIds) => broker?.endSecrets(secretIds),
    attach: (started) => {
      broker = started
    },
    endAll: () => rows.endAll(),
    stop: async () => {
      stopped = true
      clearTimeout(timer)
      await write()
    },
  }
}

function nothing() {
  return { connections: new Set<number>(), errors: new Set<number>(), uses: new Set<number>() }
}

const neverUsed = { firstMs: 0, lastMs: 0 }

function pick<T>(from: ReadonlyMap<number, T>, deviceIds: ReadonlySet<number>): (T & { deviceId: number })[] {
  return [...deviceIds].flatMap((deviceId) => {
    const facts = from.get(deviceId)
    return facts ? { ...facts, deviceId } : []
  })
}
