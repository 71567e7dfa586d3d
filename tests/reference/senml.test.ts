import { describe, expect, test } from 'vitest'
import { resolvePack } from '#shared/domain/senml.ts'

// RFC 8428 examples of section 5.1, from memory.
describe('RFC 8428, section 5.1', () => {
  test('a single measurement without a time', () => {
    expect(resolvePack([{ n: 'urn:dev:ow:10e2073a01080063', u: 'Cel', v: 23.1 }], 1_800_000_000)).toEqual({
      records: [{ name: 'urn:dev:ow:10e2073a01080063', unit: 'Cel', value: 23.1, timeMs: undefined }],
      refused: [],
    })
  })

  test('base name, base time, base unit and relative times', () => {
    const base = 1.276020076001e9
    const { records, refused } = resolvePack(
      [
        {
          bn: 'urn:dev:ow:10e2073a0108006:',
          bt: base,
          bu: 'A',
          bver: 5,
          n: 'voltage',
          u: 'V',
          v: 120.1,
        },
        { n: 'current', t: -5, v: 1.2 },
        { n: 'current', t: -4, v: 1.3 },
      ],
      1_800_000_000,
    )
    expect(refused).toEqual([])
    const name = 'urn:dev:ow:10e2073a0108006:'
    expect(records).toEqual([
      { name: `${name}voltage`, unit: 'V', value: 120.1, timeMs: 1_276_020_076_001 },
      { name: `${name}current`, unit: 'A', value: 1.2, timeMs: 1_276_020_071_001 },
      { name: `${name}current`, unit: 'A', value: 1.3, timeMs: 1_276_020_072_001 },
    ])
  })
})
