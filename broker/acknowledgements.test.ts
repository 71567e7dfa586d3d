import { expect, test } from 'vitest'
import { createAcknowledgements } from './acknowledgements.ts'

const turn = () => new Promise((resolve) => setImmediate(resolve))

function gathered() {
  const writes: number[][] = []
  const acknowledgements = createAcknowledgements((packets) => {
    const ids: number[] = []
    for (let at = 0; at < packets.length; at += 4) {
      expect(packets.readUInt16BE(at)).toBe(0x4002)
      ids.push(packets.readUInt16BE(at + 2))
    }
    writes.push(ids)
  })
  return { acknowledgements, writes }
}

test('[MQTT-4.6.0-2] acknowledgements go out in the order of the messages, whichever is stored first', async () => {
  const { acknowledgements, writes } = gathered()
  const stored = [7, 8, 9].map((id) => acknowledgements.expect(id))
  stored[2]?.()
  stored[1]?.()
  await turn()
  expect(writes).toEqual([])
  expect(acknowledgements.waiting()).toBe(3)
  stored[0]?.()
  await turn()
  expect(writes).toEqual([[7, 8, 9]])
  expect(acknowledgements.waiting()).toBe(0)
})

test('what becomes due in one turn is one write', async () => {
  const { acknowledgements, writes } = gathered()
  const stored = [1, 2, 3, 4].map((id) => acknowledgements.expect(id))
  stored[0]?.()
  stored[1]?.()
  stored[3]?.()
  await turn()
  stored[2]?.()
  await turn()
  expect(writes).toEqual([
    [1, 2],
    [3, 4],
  ])
})

test('keeps its order over many thousands, with the same ids again and again', async () => {
  const { acknowledgements, writes } = gathered()
  const sent: number[] = []
  let waiting: (() => void)[] = []
  for (let round = 0; round < 30; round++) {
    for (let count = 0; count < 300; count++) {
      const id = ((sent.length * 7) % 65_535) + 1
      sent.push(id)
      waiting.push(acknowledgements.expect(id))
    }
    // Every third stays behind until the next round.
    const behind = waiting.filter((_, index) => index % 3 === 0)
    for (const stored of waiting.filter((_, index) => index % 3 !== 0).reverse()) stored()
    await turn()
    waiting = behind
    if (round % 2 === 1) {
      for (const stored of waiting) stored()
      waiting = []
      await turn()
      expect(acknowledgements.waiting()).toBe(0)
    }
  }
  expect(writes.flat()).toEqual(sent)
})
