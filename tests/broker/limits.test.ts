import { performance } from 'node:perf_hooks'
import { afterEach, describe, expect, test } from 'vitest'
import { eventually } from './devices.ts'
import {
  credentials,
  message,
  messagesBefore,
  startBareBroker,
  type BareBroker,
  type Box,
} from './protocol/bare-broker.ts'
import { connectPacket, disconnect, publishPacket, subscribePacket } from './protocol/packets.ts'
import type { Wire } from './protocol/wire.ts'

const running: BareBroker[] = []
afterEach(async () => {
  for (const broker of running.splice(0)) await broker.stop()
})

async function start(limits: Parameters<typeof startBareBroker>[0]): Promise<BareBroker> {
  const broker = await startBareBroker(limits)
  running.push(broker)
  return broker
}

async function publishes(wire: Wire, box: Box, text: string, messageId = 1): Promise<void> {
  wire.send(publishPacket(box.readings, text, { qos: 1, messageId }))
  expect(await wire.next()).toMatchObject({ cmd: 'puback', messageId })
}

test('a device that did not read what it subscribed to may not subscribe for a while; another may', async () => {
  // Nothing at all may wait, so that the first message is too much.
  const broker = await start({ maxUnreadBytes: -1, deafForMs: 800 })
  const box = broker.newBox()
  const deaf = await broker.watch(box, box.status)
  const sender = await broker.connect(box, { clientId: 'sender' })
  await publishes(sender, box, 'stored, and not sent on')
  sender.send(publishPacket(box.status, 'online', { qos: 1, messageId: 2 }))
  expect(await deaf.rest()).toEqual([])

  const back = await broker.connect(box, { clientId: 'watcher' })
  back.send(subscribePacket(1, [box.status, 0]))
  expect(await back.next()).toMatchObject({ cmd: 'suback', granted: [128] })
  const other = broker.newBox()
  await (await broker.watch(other, other.status)).cut()
  await eventually(
    async () => {
      back.send(subscribePacket(2, [box.status, 0]))
      return back.next()
    },
    (packet) => packet.cmd === 'suback' && packet.granted[0] === 0,
  )
})

describe('connections', () => {
  test('more than may be: the next one is turned away, those that are there stay', async () => {
    const broker = await start({ maxConnections: 2 })
    const [one, two, three] = [broker.newBox(), broker.newBox(), broker.newBox()]
    const first = await broker.connect(one)
    await broker.connect(two)
    const third = broker.open()
    third.send(connectPacket(credentials(three)))
    expect(await third.rest()).toEqual([])
    await publishes(first, one, 'still here')
  })

  test('whoever has not signed in makes room for a newcomer', async () => {
    const broker = await start({ maxConnections: 2 })
    const box = broker.newBox()
    const first = await broker.connect(box)
    const idle = broker.open()
    await eventually(idle.isOpen, Boolean)
    const late = await broker.connect(broker.newBox())
    expect(await idle.rest()).toEqual([])
    await publishes(first, box, 'still here')
    await late.cut()
  })

  test('of one device: one more closes its oldest, and nobody else’s', async () => {
    const broker = await start({ maxConnectionsPerDevice: 3 })
    const box = broker.newBox()
    const other = await broker.connect(broker.newBox())
    const wires: Wire[] = []
    for (const clientId of ['a', 'b', 'c', 'd']) wires.push(await broker.connect(box, { clientId }))
    const [oldest, ...rest] = wires
    expect(await oldest?.rest()).toEqual([])
    for (const wire of [...rest, other]) expect(wire.isOpen()).toBe(true)
  })

  test('CONNECT must come whole in good time', async () => {
    const broker = await start({ connectTimeoutMs: 300 })
    const box = broker.newBox()
    const slow = broker.open()
    slow.send(Buffer.from([0x10, 50, 0, 4]))
    const begin = performance.now()
    expect(await slow.rest()).toEqual([])
    expect(performance.now() - begin).toBeGreaterThan(200)
    const quick = await broker.connect(box)
    await new Promise((resolve) => setTimeout(resolve, 500))
    await publishes(quick, box, 'it is for CONNECT only')
  })
})

describe('a storm of connects', () => {
  test('goes in at the rate, each in its turn, without holding up who is connected', async () => {
    const broker = await start({ connectsPerSecond: 200, connectBurst: 20, connectTimeoutMs: 300 })
    const steady = broker.newBox()
    const wire = await broker.connect(steady)
    const delays: number[] = []
    let messageId = 0
    const storm = { isOver: false }
    const publishing = (async () => {
      while (!storm.isOver) {
        const begin = performance.now()
        await publishes(wire, steady, 'steady', ++messageId)
        delays.push(performance.now() - begin)
      }
    })()

    const begin = performance.now()
    const boxes = Array.from({ length: 220 }, () => broker.newBox())
    // Longer than a CONNECT may take to arrive: whoever waits for its turn is not cut off for it.
    const took = await Promise.all(
      boxes.map(async (box) => {
        await broker.connect(box)
        return performance.now() - begin
      }),
    )
    storm.isOver = true
    await publishing
    expect(Math.max(...took)).toBeGreaterThan(800)
    expect(Math.max(...took)).toBeLessThan(5_000)
    expect(took.filter((ms) => ms < 500).length).toBeLessThan(150)
    delays.sort((a, b) => a - b)
    expect(delays.length).toBeGreaterThan(50)
    expect(delays[Math.floor(delays.length * 0.9)]).toBeLessThan(100)
  })

  test('500 at once are all in within seconds, at the usual limits', async () => {
    const broker = await start({})
    const boxes = Array.from({ length: 500 }, () => broker.newBox())
    const begin = performance.now()
    await Promise.all(boxes.map((box) => broker.connect(box)))
    expect(performance.now() - begin).toBeLessThan(5_000)
  })

  test('who gives up before its turn takes nobody’s place', async () => {
    const broker = await start({ connectsPerSecond: 50, connectBurst: 1 })
    await broker.connect(broker.newBox())
    const wires = Array.from({ length: 10 }, () => {
      const wire = broker.open()
      wire.send(connectPacket(credentials(broker.newBox())))
      return wire
    })
    for (const wire of wires) await wire.cut()
    await broker.connect(broker.newBox())
  })
})

describe('what a CONNECT may ask for', () => {
  test('a client id above the limit is answered with return code 2 [MQTT-3.1.3-9]', async () => {
    const broker = await start({ maxClientIdBytes: 30 })
    const box = broker.newBox()
    await (await broker.connect(box, { clientId: 'x'.repeat(30) })).cut()
    const wire = broker.open()
    wire.send(connectPacket({ ...credentials(box), clientId: 'é'.repeat(16) }))
    expect(await wire.rest()).toMatchObject([{ cmd: 'connack', returnCode: 2, sessionPresent: false }])
  })

  test('a will above the limit is answered with return code 5 and told', async () => {
    const broker = await start({ maxKeptBytes: 100 })
    const box = broker.newBox()
    const wire = broker.open()
    const will = { topic: box.status, payload: 'x'.repeat(101), qos: 1 as const, retain: true }
    wire.send(connectPacket({ ...credentials(box), will }))
    expect(await wire.rest()).toMatchObject([{ cmd: 'connack', returnCode: 5 }])
    expect(broker.refusals(box)).toMatchObject([{ reason: 'too-large', topic: box.status }])
  })

  test('no keep-alive, or a very long one: silence is heard out for the limit', async () => {
    const broker = await start({ maxKeepAliveMs: 400 })
    for (const keepalive of [0, 60_000]) {
      const wire = await broker.connect(broker.newBox(), { keepalive })
      const begin = performance.now()
      expect(await wire.rest()).toEqual([])
      expect(performance.now() - begin).toBeGreaterThan(450)
    }
  })
})

describe('what is kept for later', () => {
  test('a status above the limit closes the connection and is told', async () => {
    const broker = await start({ maxKeptBytes: 100 })
    const box = broker.newBox()
    const wire = await broker.connect(box)
    wire.send(publishPacket(box.status, 'x'.repeat(101), { qos: 1, messageId: 1, retain: true }))
    expect(await wire.rest()).toEqual([])
    expect(broker.refusals(box)).toMatchObject([{ reason: 'too-large', topic: box.status }])
  })

  test('readings are not retained: they are stored', async () => {
    const broker = await start({})
    const box = broker.newBox()
    const wire = await broker.connect(box)
    wire.send(publishPacket(box.readings, 'a reading', { qos: 1, messageId: 1, retain: true }))
    expect(await wire.next()).toMatchObject({ cmd: 'puback' })
    expect(broker.stored(box)).toEqual(['a reading'])
    const watcher = await broker.watch(box, box.all, 1)
    expect(await messagesBefore(broker, box, watcher)).toEqual([])
  })

  test('for a session that is away only so many messages wait', async () => {
    const broker = await start({ maxWaiting: 5 })
    const box = broker.newBox()
    const kept = await broker.connect(box, { clientId: 'kept', clean: false })
    kept.send(subscribePacket(1, [box.all, 1]))
    expect(await kept.next()).toMatchObject({ cmd: 'suback' })
    await kept.cut()
    const publisher = await broker.connect(box, { clientId: 'publisher' })
    for (let count = 1; count <= 8; count++) await publishes(publisher, box, `message ${count}`, count)
    const back = await broker.connect(box, { clientId: 'kept', clean: false })
    const waited = await messagesBefore(broker, box, back)
    expect(waited.map((packet) => message(packet).payload)).toEqual(
      [1, 2, 3, 4, 5].map((count) => `message ${count}`),
    )
  })

  test('of a device’s sessions that are away only so many, the newest', async () => {
    const broker = await start({ maxKeptSessions: 2 })
    const box = broker.newBox()
    for (const clientId of ['first', 'second', 'third']) {
      const wire = await broker.connect(box, { clientId, clean: false })
      wire.send(subscribePacket(1, [box.status, 1]))
      expect(await wire.next()).toMatchObject({ cmd: 'suback' })
      await wire.cut()
    }
    const isKept = async (clientId: string) => {
      const wire = broker.open()
      wire.send(connectPacket({ ...credentials(box), clientId, clean: false }))
      const answer = await wire.next()
      await wire.cut()
      return answer.cmd === 'connack' && answer.sessionPresent
    }
    expect(await isKept('first')).toBe(false)
    expect(await isKept('second')).toBe(true)
    expect(await isKept('third')).toBe(true)
  })

  test('a filter that was refused is not kept beside one that was granted', async () => {
    const broker = await start({})
    const [box, other] = [broker.newBox(), broker.newBox()]
    const nosy = await broker.connect(box, { clientId: 'nosy', clean: false })
    nosy.send(subscribePacket(1, [box.all, 1], ['#', 1], [other.status, 1]))
    expect(await nosy.next()).toMatchObject({ cmd: 'suback', granted: [1, 128, 128] })
    await nosy.cut()
    const wire = await broker.connect(other)
    wire.send(publishPacket(other.status, 'not for you', { qos: 1, messageId: 1 }))
    expect(await wire.next()).toMatchObject({ cmd: 'puback' })
    const back = await broker.connect(box, { clientId: 'nosy', clean: false })
    expect(await messagesBefore(broker, box, back)).toEqual([])
  })
})

describe('the status that is kept', () => {
  const offline = (box: Box) => ({ topic: box.status, payload: 'offline', qos: 1 as const, retain: true })
  const sayOnline = async (wire: Wire, box: Box) => {
    wire.send(publishPacket(box.status, 'online', { qos: 1, messageId: 1, retain: true }))
    expect(await wire.next()).toMatchObject({ cmd: 'puback' })
  }
  const kept = async (broker: BareBroker, box: Box) => {
    const wire = await broker.connect(box, { clientId: 'reader' })
    wire.send(subscribePacket(1, [box.status, 1]))
    expect(await wire.next()).toMatchObject({ cmd: 'suback' })
    const given = await messagesBefore(broker, box, wire)
    wire.send(disconnect)
    await wire.rest()
    return given.map((packet) => message(packet).payload)
  }

  test('is online after a takeover: the will of the old connection came before', async () => {
    const broker = await start({})
    const box = broker.newBox()
    const first = await broker.connect(box, { clientId: 'same', will: offline(box) })
    await sayOnline(first, box)
    const second = broker.open()
    // In one breath, as a quick device does.
    second.send(
      connectPacket({ ...credentials(box), clientId: 'same', will: offline(box) }),
      publishPacket(box.status, 'online', { qos: 1, messageId: 1, retain: true }),
    )
    expect(await second.next()).toMatchObject({ cmd: 'connack' })
    expect(await second.next()).toMatchObject({ cmd: 'puback' })
    expect(await first.rest()).toEqual([])
    expect(await kept(broker, box)).toEqual(['online'])
  })

  test('is online when a line that was lost is given up after the device came back as another client', async () => {
    const broker = await start({})
    const box = broker.newBox()
    const lost = await broker.connect(box, { clientId: 'before', keepalive: 1, will: offline(box) })
    await sayOnline(lost, box)
    const back = await broker.connect(box, { clientId: 'after', will: offline(box) })
    await sayOnline(back, box)
    expect(await lost.rest()).toEqual([])
    expect(await kept(broker, box)).toEqual(['online'])
    expect(broker.statuses(box).at(-1)).toBe('online')
    await back.cut()
    await eventually(
      () => kept(broker, box),
      ([status]) => status === 'offline',
    )
  })
})
