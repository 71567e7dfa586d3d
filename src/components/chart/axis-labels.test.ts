import { describe, expect, it } from 'vitest'
import { axisLabels } from './axis-labels.ts'
import { textWidth } from './text-width.ts'

const tick = (x: number, midnight = false) => ({ at: x, x, midnight, twice: false })

function labels(services: { x: number; text: string }[]) {
  return axisLabels({
    ticks: [tick(4), tick(100), tick(200, true), tick(300), tick(400)],
    services,
    width: 420,
    size: 20,
    textOf: (at) => (at.midnight ? 'Wed 00:00' : '22:00'),
  })
}

describe('axisLabels', () => {
  it('leaves out what would be cut off at an end, and keeps the rest in order', () => {
    expect(labels([]).map(({ x, kind }) => [x, kind])).toEqual([
      [100, 'tick'],
      [200, 'midnight'],
      [300, 'tick'],
    ])
  })

  it('gives the service hour its place before the ticks', () => {
    const shown = labels([{ x: 340, text: 'service 11:00' }])
    expect(shown.map(({ kind }) => kind)).toEqual(['tick', 'midnight', 'service'])
  })

  it('moves a service hour at the edge in', () => {
    const shown = labels([{ x: 418, text: 'service' }])
    const service = shown.find(({ kind }) => kind === 'service')
    expect((service?.x ?? 0) + textWidth('service', 20) / 2).toBeLessThanOrEqual(420)
  })
})
