import { expect } from 'vitest'
import { pino } from 'pino'
import type { IConnectPacket, IPublishPacket, Packet } from 'mqtt-packet'
import { readingsTopic, statusTopic } from '#shared/contract/mqtt.ts'
import { createBroker, type BrokerOptions } from '../../../broker/broker.ts'
import type { DeviceMessage, DeviceStatus, Refusal } from '../../../broker/device.ts'
import { connectPacket, publishPacket, subscribePacket } from './packets.ts'
import { openWire, type Wire } from './wire.ts'

/** A device that the broker knows. */
export interface Box {
  username: string
  readings: string
  status: string
  /** The filter for both. */
  all: string
}

/** The broker alone. Whatever it is given is stored at once, unless a test says otherwise. */
export interface BareBroker {
  port: number
  /** A device that no other test uses. */
  newBox: () => Box
  /** A connection that has sent nothing yet. */
  open: () => Wire
  /** A device's connection, accepted. */
  connect: (box: Box, options?: Omit<Partial<IConnectPacket>, 'cmd'>) => Promise<Wire>
  /** A connection of the device that has subscribed. */
  watch: (box: Box, filter: string, qos?: 0 | 1 | 2) => Promise<Wire>
  /** What was handed on to be stored, as text. */
  stored: (box: Box) => string[]
  refusals: (box: Box) => Refusal[]
  statuses: (box: Box) => DeviceStatus[]
  /** Stores what follows only when it is called; false: what is under way cannot be stored. */
  holdStore: () => (isStored?: boolean) => void
  stop: () => Promise<void>
}

export const boxSecret = 'the secret of a box'

export async function startBareBroker(limits: BrokerOptions['limits'] = {}): Promise<BareBroker> {
  const messages: DeviceMessage[] = []
  const refusals: Refusal[] = []
  const statuses: [username: string, status: DeviceStatus][] = []
  let storing: Promise<unknown> = Promise.resolve()
  let boxes = 0
  const broker = await createBroker({
    port: 0,
    host: '127.0.0.1',
    signIn: (username, secret) => Promise.resolve(secret === boxSecret ? deviceOf(username) : undefined),
    accept: async (message) => {
      messages.push(message)
      await storing
    },
    onRefused: (refusal) => refusals.push(refusal),
    onStatus: (device, status) => statuses.push([device.username, status]),
    log: pino({ level: 'silent' }),
    limits,
  })

  const open = () => openWire(broker.port)
  const connect: BareBroker['connect'] = async (box, options = {}) => {
    const wire = open()
    wire.send(connectPacket({ ...credentials(box), ...options }))
    expect(await wire.next()).toMatchObject({ cmd: 'connack', returnCode: 0 })
    return wire
  }

  return {
    port: broker.port,
    newBox: () => {
      const slug = `box-${++boxes}`
      const readings = readingsTopic('yard', slug)
      const status = statusTopic('yard', slug)
      return { username: `yard.${slug}`, readings, status, all: readings.replace('readings', '#') }
    },
    open,
    connect,
    watch: async (box, filter, qos = 0) => {
      const wire = await connect(box, { clientId: 'watcher' })
      wire.send(subscribePacket(1, [filter, qos]))
      expect(await wire.next()).toMatchObject({ cmd: 'suback', granted: [qos] })
      return wire
    },
    stored: ({ username }) =>
      messages.filter(({ device }) => device.username === username).map(({ payload }) => payload.toString()),
    refusals: ({ username }) => refusals.filter(({ device }) => device.username === username),
    statuses: ({ username }) => statuses.filter(([name]) => name === username).map(([, status]) => status),
    holdStore: () => {
      let settle: (isStored: boolean) => void = () => undefined
      storing = new Promise<void>((resolve, reject) => {
        settle = (isStored) => (isStored ? resolve() : reject(new Error('the store is away')))
      })
      // Nobody may be waiting for it.
      storing.catch(() => undefined)
      return (isStored = true) => {
        storing = Promise.resolve()
        settle(isStored)
      }
    },
    stop: () => broker.stop(),
  }
}

export function credentials(box: Box): { username: string; password: Buffer } {
  return { username: box.username, password: Buffer.from(boxSecret) }
}

/** What a subscriber sees of a message. */
export function message(
  packet: Packet,
): Pick<IPublishPacket, 'topic' | 'qos' | 'retain' | 'dup'> & { payload: string } {
  if (packet.cmd !== 'publish') throw new Error(`A PUBLISH was expected; ${packet.cmd} came`)
  const { topic, payload, qos, retain, dup } = packet
  return { topic, payload: payload.toString(), qos, retain, dup }
}

/** The packet identifier of a packet that has one. */
export function idOf(packet: Packet): number {
  if (packet.messageId === undefined) throw new Error(`${packet.cmd} came without a packet identifier`)
  return packet.messageId
}

/**
 * Waits until everything that a device has sent before is through: a message of its own that must come to the watcher.
 * @returns what the watcher got before that
 */
export async function messagesBefore(broker: BareBroker, box: Box, watcher: Wire): Promise<Packet[]> {
  const marker = await broker.connect(box, { clientId: 'marker' })
  marker.send(publishPacket(box.status, 'that was all'))
  const before: Packet[] = []
  for (;;) {
    const packet = await watcher.next()
    if (packet.cmd === 'publish' && packet.payload.toString() === 'that was all') break
    before.push(packet)
  }
  await marker.cut()
  return before
}

let deviceIds = 0
const deviceIdOf = new Map<string, number>()
function deviceOf(username: string) {
  const [siteSlug = '', deviceSlug = ''] = username.split('.')
  const deviceId = deviceIdOf.get(username) ?? ++deviceIds
  deviceIdOf.set(username, deviceId)
  return { deviceId, username, deviceSlug, siteId: 1, siteSlug }
}
