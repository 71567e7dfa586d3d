import { describe, expect, test } from 'vitest'
import { seededRandom } from '#shared/domain/random.ts'
import { decodePlain } from './decode-plain.ts'
import { decodePack, decodeThoroughly } from './decode.ts'
import type { KnownChannels } from './known-device.ts'

const nowMs = 1_796_083_200_123
const dayMs = 86_400_000
const always = { fromMs: -Infinity, toMs: Infinity }

const channels: KnownChannels = new Map([
  [1, { id: 101, sensors: [{ ...always, sensor: { kind: 'digital', offsetC: 0 } }] }],
  [2, { id: 102, sensors: [{ ...always, sensor: { kind: 'pt100', offsetC: 0.4 } }] }],
  [3, { id: 103, sensors: [{ ...always, sensor: { kind: 'thermocouple_k', offsetC: -1 } }] }],
  [
    4,
    {
      id: 104,
      sensors: [
        { fromMs: nowMs - 2 * dayMs, toMs: nowMs - dayMs, sensor: { kind: 'pt100', offsetC: 0 } },
        { fromMs: nowMs - dayMs, toMs: Infinity, sensor: { kind: 'digital', offsetC: 0.2 } },
      ],
    },
  ],
])

describe('the quick way through a pack', () => {
  test.each([
    '[{"n":"1","u":"Cel","v":93.25,"t":1796083200.1}]',
    '[{"n":"1","u":"Cel","v":93.25}]',
    '[{"bn":"","bt":1796083200.1,"bu":"Cel","n":"1","v":93.25},{"n":"4","v":60,"t":-5},{"n":"2","u":"Ohm","v":138.5}]',
    '[{"bt":1796083100,"n":"1","u":"Cel","v":-12},{"n":"3","u":"V","v":0.004,"t":60.5}]',
  ])('takes %s', (text) => {
    const quick = decodePlain(JSON.parse(text), channels, nowMs)
    expect(quick).toBeDefined()
    expect(quick).toEqual(decodeThoroughly(JSON.parse(text), channels, nowMs).readings)
  })

  test.each([
    ['a relative time', '[{"n":"1","u":"Cel","v":93,"t":-5}]'],
    ['another base name', '[{"bn":"1","u":"Cel","v":93}]'],
    ['a base value', '[{"bv":1,"n":"1","u":"Cel","v":93}]'],
    ['a state of the device', '[{"n":"battery","u":"%EL","v":93}]'],
    ['a channel with a zero in front', '[{"n":"01","u":"Cel","v":93}]'],
    ['a channel as a number', '[{"n":1,"u":"Cel","v":93}]'],
    ['a field that must be understood', '[{"n":"1","u":"Cel","v":93,"x_":1}]'],
    ['a value above all numbers', '[{"n":"1","u":"Cel","v":1e999}]'],
    ['a base unit longer than the contract has it', `[{"bu":"${'x'.repeat(21)}","n":"1","u":"Cel","v":93}]`],
    ['a field of an object’s own making', '[{"n":"1","u":"Cel","v":93,"__proto__":{"v":1}}]'],
    ['no pack', '{"n":"1","u":"Cel","v":93}'],
    ['nothing', 'null'],
  ])('leaves %s to the thorough way', (_what, text) => {
    expect(decodePlain(JSON.parse(text), channels, nowMs)).toBeUndefined()
    expect(decodePack(Buffer.from(text), channels, nowMs)).toEqual(
      decodeThoroughly(JSON.parse(text), channels, nowMs),
    )
  })

  test('gives of every pack just what the thorough way gives', () => {
    const random = seededRandom('packs')
    const pick = (choices: readonly string[]) => choices[Math.floor(random.uniform() * choices.length)] ?? ''
    const usualTime = () => String((nowMs - Math.floor(random.uniform() * 3 * dayMs)) / 1000)
    /** Mostly what is usual, now and then anything else. */
    const field = (label: string, usual: () => string, odd: readonly string[]) =>
      `"${label}":${random.uniform() < 0.04 ? pick(odd) : usual()}`
    const oddNumbers = ['1e999', '-1e999', '0', '-0', '"5"', 'null', '700', '-60', '1e-7', 'true', '[]']
    const oddTexts = [
      '""',
      '"01"',
      '"7"',
      '"battery"',
      '"x y"',
      '3',
      'null',
      '"Cel_"',
      '"1.0"',
      '"1e0"',
      '" 1"',
    ]
    const record = (index: number) => {
      const channel = pick(['1', '1', '2', '3', '4'])
      const [unit, value] =
        channel === '2' ? ['Ohm', 138] : channel === '3' ? ['V', 0.004] : ['Cel', random.uniform() * 120]
      const fields = [
        field('n', () => `"${channel}"`, oddTexts),
        field('u', () => `"${unit}"`, [...oddTexts, '"Cel"', '"Ohm"', '"V"']),
        field('v', () => String(value), oddNumbers),
        field('t', usualTime, [...oddNumbers, '1e10', '-5', '1000']),
      ]
      if (index === 0 && random.uniform() < 0.3) {
        fields.pop()
        fields.push(
          field('bt', usualTime, oddNumbers),
          field('bu', () => '"Cel"', oddTexts),
        )
      }
      if (random.uniform() < 0.2) fields.splice(1, 1)
      if (random.uniform() < 0.04)
        fields.push(pick(['"bn":""', '"bn":"1"', '"bv":2', '"bver":11', '"z":1', '"q_":1']))
      return random.uniform() < 0.01 ? pick(['null', '[]', '7', '{}', '"x"']) : `{${fields.join()}}`
    }
    let quick = 0
    let refused = 0
    for (let round = 0; round < 5000; round++) {
      const text = `[${Array.from({ length: Math.floor(random.uniform() * 4) }, (_, index) => record(index)).join()}]`
      const thorough = decodeThoroughly(JSON.parse(text), channels, nowMs)
      expect(decodePack(Buffer.from(text), channels, nowMs), text).toEqual(thorough)
      if (decodePlain(JSON.parse(text), channels, nowMs)) quick++
      if (thorough.refused.length > 0) refused++
    }
    // Both ways were tried often.
    expect(quick).toBeGreaterThan(1000)
    expect(refused).toBeGreaterThan(1000)
  })
})
