import { afterAll, beforeAll, describe, expect, test } from 'vitest'
import { boxSecret, credentials, startBareBroker, type BareBroker, type Box } from './bare-broker.ts'
import {
  connectFlag,
  connectPacket,
  disconnect,
  field,
  pingRequest,
  publishPacket,
  rawConnect,
  subscribePacket,
} from './packets.ts'
import type { Wire } from './wire.ts'

let broker: BareBroker
beforeAll(async () => {
  broker = await startBareBroker({ connectTimeoutMs: 700 })
})
afterAll(() => broker.stop())

const both = connectFlag.clean | connectFlag.username | connectFlag.password
const signIn = (box: Box) => [field(box.username), field(boxSecret)]

/** Sends bytes as the first of a connection. */
function openWith(...parts: Parameters<Wire['send']>): Wire {
  const wire = broker.open()
  wire.send(...parts)
  return wire
}

describe('[MQTT-3.1.0-1] the first packet must be CONNECT; any other closes the connection', () => {
  const box = { readings: 'coalhand/yard/box/readings' }
  test.each([
    ['PUBLISH', publishPacket(box.readings, '[]', { qos: 1, messageId: 1 })],
    ['SUBSCRIBE', subscribePacket(1, ['#', 0])],
    ['PINGREQ', pingRequest],
    ['DISCONNECT', disconnect],
  ])('%s', async (_name, packet) => {
    expect(await openWith(packet).rest()).toEqual([])
  })

  test('[3.1] and it must come in good time', async () => {
    const begin = performance.now()
    expect(await broker.open().rest()).toEqual([])
    expect(performance.now() - begin).toBeGreaterThan(600)
  })
})

test('[MQTT-3.1.0-2] a second CONNECT closes the connection', async () => {
  const box = broker.newBox()
  const wire = await broker.connect(box)
  wire.send(connectPacket(credentials(box)))
  expect(await wire.rest()).toEqual([])
})

test('[MQTT-3.1.2-1] another protocol name closes the connection', async () => {
  const box = broker.newBox()
  const wire = openWith(rawConnect({ protocol: 'MQTX', flags: both, fields: [field('x'), ...signIn(box)] }))
  expect(await wire.rest()).toEqual([])
})

describe('[MQTT-3.1.2-2] a level that is not supported is answered with return code 1, then closed', () => {
  test('5', async () => {
    const box = broker.newBox()
    // MQTT 5 has a length of properties after the keep-alive.
    const wire = openWith(
      rawConnect({ level: 5, flags: both, fields: [Buffer.from([0]), field('x'), ...signIn(box)] }),
    )
    const answers = await wire.rest()
    expect(answers).toMatchObject([{ cmd: 'connack', returnCode: 1, sessionPresent: false }])
  })

  test.each([0, 6, 127])('(differs) %d: closed without an answer', async (level) => {
    const box = broker.newBox()
    const wire = openWith(rawConnect({ level, flags: both, fields: [field('x'), ...signIn(box)] }))
    expect(await wire.rest()).toEqual([])
  })

  test.each([
    ['MQIsdp', 3],
    ['MQTT', 0x84],
  ])('(differs) %s at level %d, as older devices and bridges have it, is let in', async (protocol, level) => {
    const box = broker.newBox()
    const wire = openWith(rawConnect({ protocol, level, flags: both, fields: [field('x'), ...signIn(box)] }))
    expect(await wire.next()).toMatchObject({ cmd: 'connack', returnCode: 0 })
    wire.send(publishPacket(box.readings, '[]', { qos: 1, messageId: 1 }))
    expect(await wire.next()).toMatchObject({ cmd: 'puback', messageId: 1 })
    await wire.cut()
  })
})

test('[MQTT-3.1.2-3] the reserved flag set closes the connection', async () => {
  const box = broker.newBox()
  const flags = both | connectFlag.reserved
  expect(await openWith(rawConnect({ flags, fields: [field('x'), ...signIn(box)] })).rest()).toEqual([])
})

describe('[MQTT-3.1.4-1] a CONNECT that does not conform is closed without an answer', () => {
  test.each([
    ['[MQTT-3.1.2-11] will QoS without a will', connectFlag.willQos(1), []],
    ['[MQTT-3.1.2-15] will retain without a will', connectFlag.willRetain, []],
    ['[MQTT-3.1.2-9] the will flag without a will', connectFlag.will, []],
  ])('%s', async (_name, flags, fields) => {
    const box = broker.newBox()
    const wire = openWith(
      rawConnect({ flags: both | flags, fields: [field('x'), ...fields, ...signIn(box)] }),
    )
    expect(await wire.rest()).toEqual([])
  })

  test('[MQTT-3.1.2-19] the user name flag without a user name', async () => {
    const wire = openWith(rawConnect({ flags: both, fields: [field('x')] }))
    expect(await wire.rest()).toEqual([])
  })

  test('[MQTT-3.1.2-21] the password flag without a password', async () => {
    const box = broker.newBox()
    const wire = openWith(rawConnect({ flags: both, fields: [field('x'), field(box.username)] }))
    expect(await wire.rest()).toEqual([])
  })

  test.each([
    ['[MQTT-3.1.2-22] a password without a user name', connectFlag.password, [field(boxSecret)]],
    ['[MQTT-3.1.2-18] a user name without its flag', 0, [field('yard.box'), field(boxSecret)]],
  ])('(differs) %s is answered with return code 4 before it is closed', async (_name, flag, fields) => {
    const wire = openWith(rawConnect({ flags: connectFlag.clean | flag, fields: [field('x'), ...fields] }))
    expect(await wire.rest()).toMatchObject([{ cmd: 'connack', returnCode: 4 }])
  })

  test('[MQTT-3.1.3-3] no client id at all', async () => {
    expect(await openWith(rawConnect({ flags: connectFlag.clean, fields: [] })).rest()).toEqual([])
  })
})

describe('[3.2.2.3] who is not let in is told why, then closed [MQTT-3.2.2-5]', () => {
  const cases: [string, number, () => Parameters<typeof connectPacket>[0]][] = [
    ['a wrong secret', 4, () => ({ ...credentials(broker.newBox()), password: Buffer.from('wrong') })],
    ['neither user name nor secret', 4, () => ({})],
    ['a user name alone', 4, () => ({ username: broker.newBox().username })],
    [
      'a will for a foreign topic',
      5,
      () => ({
        ...credentials(broker.newBox()),
        will: { topic: broker.newBox().status, payload: 'offline', qos: 1, retain: true },
      }),
    ],
  ]
  test.each(cases)('%s: return code %d, no session [MQTT-3.2.2-4]', async (_name, returnCode, options) => {
    const wire = openWith(connectPacket({ clean: false, ...options() }))
    expect(await wire.rest()).toMatchObject([{ cmd: 'connack', returnCode, sessionPresent: false }])
  })

  test('[MQTT-3.1.4-5] what it sent after its CONNECT is not looked at', async () => {
    const box = broker.newBox()
    const wire = openWith(
      connectPacket({ username: box.username, password: Buffer.from('wrong') }),
      publishPacket(box.readings, '[]', { qos: 1, messageId: 1 }),
      subscribePacket(2, [box.status, 1]),
    )
    expect(await wire.rest()).toMatchObject([{ cmd: 'connack', returnCode: 4 }])
    expect(broker.stored(box)).toEqual([])
  })
})

describe('client ids', () => {
  test('[MQTT-3.1.3-5] of 1 to 23 letters and digits are allowed', async () => {
    const box = broker.newBox()
    for (const clientId of ['a', 'Z9', '0123456789abcdefghijklm']) {
      const wire = await broker.connect(box, { clientId })
      await wire.cut()
    }
  })

  test('[MQTT-3.1.3-6] left empty, each connection is a client of its own', async () => {
    const box = broker.newBox()
    const first = await broker.connect(box, { clientId: '' })
    const second = await broker.connect(box, { clientId: '' })
    first.send(publishPacket(box.readings, 'first', { qos: 1, messageId: 1 }))
    expect(await first.next()).toMatchObject({ cmd: 'puback' })
    second.send(publishPacket(box.readings, 'second', { qos: 1, messageId: 1 }))
    expect(await second.next()).toMatchObject({ cmd: 'puback' })
    await Promise.all([first.cut(), second.cut()])
  })
})

test('[MQTT-3.2.0-1] CONNACK comes first, byte for byte, whatever follows CONNECT at once', async () => {
  const box = broker.newBox()
  const wire = openWith(
    connectPacket(credentials(box)),
    pingRequest,
    subscribePacket(1, [box.status, 0]),
    publishPacket(box.readings, '[]', { qos: 1, messageId: 2 }),
  )
  for (let packets = 0; packets < 4; packets++) await wire.next()
  expect(wire.bytes().subarray(0, 4)).toEqual(Buffer.from([0x20, 2, 0, 0]))
  await wire.cut()
})

describe('keep-alive', () => {
  test('[MQTT-3.1.2-24] of one second: silence is heard out for one and a half, not much longer', async () => {
    const wire = await broker.connect(broker.newBox(), { keepalive: 1 })
    const begin = performance.now()
    expect(await wire.rest()).toEqual([])
    expect(performance.now() - begin).toBeGreaterThan(1_400)
    expect(performance.now() - begin).toBeLessThan(3_000)
  })

  test('[MQTT-3.1.2-24] any packet counts, not only PINGREQ', async () => {
    const box = broker.newBox()
    const wire = await broker.connect(box, { keepalive: 1 })
    for (let messageId = 1; messageId <= 3; messageId++) {
      await new Promise((resolve) => setTimeout(resolve, 800))
      wire.send(publishPacket(box.readings, '[]', { qos: 1, messageId }))
      expect(await wire.next()).toMatchObject({ cmd: 'puback', messageId })
    }
    await wire.cut()
  })

  test('[3.1.2.10] of zero: silence is no reason to close', async () => {
    const wire = await broker.connect(broker.newBox(), { keepalive: 0 })
    await new Promise((resolve) => setTimeout(resolve, 2_000))
    wire.send(pingRequest)
    expect(await wire.next()).toMatchObject({ cmd: 'pingresp' })
    await wire.cut()
  })
})

test('[MQTT-3.12.4-1] each PINGREQ is answered, three in a segment three times', async () => {
  const wire = await broker.connect(broker.newBox())
  wire.send(pingRequest, pingRequest, pingRequest)
  for (let count = 0; count < 3; count++) expect(await wire.next()).toMatchObject({ cmd: 'pingresp' })
  expect(wire.bytes().subarray(4)).toEqual(Buffer.from([0xd0, 0, 0xd0, 0, 0xd0, 0]))
  await wire.cut()
})

describe('DISCONNECT', () => {
  test('[3.14.4] the broker closes too', async () => {
    const wire = await broker.connect(broker.newBox())
    wire.send(disconnect)
    expect(await wire.rest()).toEqual([])
  })

  test('[3.14] what came before it is stored, at QoS 0 too', async () => {
    const box = broker.newBox()
    const wire = await broker.connect(box)
    wire.send(publishPacket(box.readings, 'before'), disconnect)
    await wire.rest()
    expect(broker.stored(box)).toEqual(['before'])
  })
})
