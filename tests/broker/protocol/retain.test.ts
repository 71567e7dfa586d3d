import { afterAll, beforeAll, describe, expect, test } from 'vitest'
import { idOf, message, messagesBefore, startBareBroker, type BareBroker, type Box } from './bare-broker.ts'
import { ackPacket, publishPacket, subscribePacket } from './packets.ts'

let broker: BareBroker
beforeAll(async () => {
  broker = await startBareBroker()
})
afterAll(() => broker.stop())

/** Publishes with the retain flag and waits until that is done. */
async function retain(box: Box, payload: string, qos: 0 | 1 = 1): Promise<void> {
  const wire = await broker.connect(box, { clientId: 'publisher' })
  if (qos === 0) wire.send(publishPacket(box.status, payload, { retain: true }))
  wire.send(
    publishPacket(qos === 0 ? box.readings : box.status, payload, {
      qos: 1,
      messageId: 1,
      retain: qos === 1,
    }),
  )
  expect(await wire.next()).toMatchObject({ cmd: 'puback' })
  await wire.cut()
}

/** What someone who subscribes now is given. */
async function given(box: Box, filter = box.status, qos: 0 | 1 | 2 = 1) {
  const wire = await broker.watch(box, filter, qos)
  const packets = await messagesBefore(broker, box, wire)
  await wire.cut()
  return packets.map(message)
}

describe('[MQTT-3.3.1-5] what is published with the retain flag', () => {
  test('is given to who subscribes later, with the retain flag [MQTT-3.3.1-6] [MQTT-3.3.1-8]', async () => {
    const box = broker.newBox()
    await retain(box, 'online')
    expect(await given(box)).toEqual([
      { topic: box.status, payload: 'online', qos: 1, retain: true, dup: false },
    ])
  })

  test('outlives the session that published it [MQTT-3.1.2.7]', async () => {
    const box = broker.newBox()
    await retain(box, 'online')
    expect(await given(box)).toHaveLength(1)
    expect(await given(box)).toHaveLength(1)
  })

  test('at QoS 0 replaces what was kept, and is kept itself [MQTT-3.3.1-7]', async () => {
    const box = broker.newBox()
    await retain(box, 'online')
    await retain(box, 'offline', 0)
    expect(await given(box)).toMatchObject([{ payload: 'offline', qos: 0 }])
  })

  test('is the last only', async () => {
    const box = broker.newBox()
    for (const payload of ['online', 'offline', 'online again']) await retain(box, payload)
    expect(await given(box)).toMatchObject([{ payload: 'online again' }])
  })

  test('is given for a filter with a wildcard too', async () => {
    const box = broker.newBox()
    await retain(box, 'online')
    expect(await given(box, box.all)).toMatchObject([{ topic: box.status, payload: 'online', retain: true }])
  })

  test('[MQTT-3.8.4-6] is given at no more than the QoS that was granted', async () => {
    const box = broker.newBox()
    await retain(box, 'online')
    expect(await given(box, box.status, 0)).toMatchObject([{ payload: 'online', qos: 0 }])
  })

  test('(differs) [MQTT-3.8.4-6] by wildcard it is given at the QoS that it was published at', async () => {
    const box = broker.newBox()
    await retain(box, 'online')
    expect(await given(box, box.all, 0)).toMatchObject([{ payload: 'online', qos: 1 }])
  })

  test('reaches who subscribes already without the flag [MQTT-3.3.1-9]', async () => {
    const box = broker.newBox()
    const watcher = await broker.watch(box, box.status, 1)
    await retain(box, 'online')
    expect(message(await watcher.next())).toMatchObject({ payload: 'online', retain: false })
    await watcher.cut()
  })

  test('is given to nobody who may not read it', async () => {
    const box = broker.newBox()
    await retain(box, 'online')
    const other = broker.newBox()
    const wire = await broker.connect(other)
    wire.send(subscribePacket(1, [box.status, 1], [other.status, 1]))
    expect(await wire.next()).toMatchObject({ cmd: 'suback', granted: [128, 1] })
    expect(await messagesBefore(broker, other, wire)).toEqual([])
    await wire.cut()
  })
})

test('[MQTT-3.3.1-10] an empty payload with the retain flag clears what was kept, and is passed on [MQTT-3.3.1-11]', async () => {
  const box = broker.newBox()
  await retain(box, 'online')
  const watcher = await broker.watch(box, box.status, 1)
  const first = await watcher.next()
  expect(message(first).payload).toBe('online')
  watcher.send(ackPacket('puback', idOf(first)))
  await retain(box, '')
  expect(message(await watcher.next())).toMatchObject({ payload: '', retain: false })
  await watcher.cut()
  expect(await given(box)).toEqual([])
})

test('[MQTT-3.3.1-12] without the retain flag nothing is kept, and what is kept stays', async () => {
  const box = broker.newBox()
  await retain(box, 'online')
  const wire = await broker.connect(box)
  wire.send(publishPacket(box.status, 'offline', { qos: 1, messageId: 1 }))
  expect(await wire.next()).toMatchObject({ cmd: 'puback' })
  wire.send(publishPacket(box.status, '', { qos: 1, messageId: 2 }))
  expect(await wire.next()).toMatchObject({ cmd: 'puback' })
  expect(await given(box)).toMatchObject([{ payload: 'online' }])
  await wire.cut()
})

test('[3.1.2.4] a kept session is not given retained messages for coming back', async () => {
  const box = broker.newBox()
  await retain(box, 'online')
  const first = await broker.connect(box, { clientId: 'kept', clean: false })
  first.send(subscribePacket(1, [box.status, 1]))
  expect(await first.next()).toMatchObject({ cmd: 'suback' })
  first.send(ackPacket('puback', idOf(await first.next())))
  await first.cut()
  const second = await broker.connect(box, { clientId: 'kept', clean: false })
  expect(await messagesBefore(broker, box, second)).toEqual([])
  await second.cut()
})
