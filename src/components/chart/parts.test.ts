import { describe, expect, it } from 'vitest'
import { fontFamily, palettes } from '@/assets/tokens.ts'
import { chartStyle } from './chart-style.ts'
import { envelope } from './envelope.ts'
import { eventShapes } from './event-marks.ts'
import { fanCover, fanEdges, fanShapes } from './fan.ts'
import { laneFrame } from './lane-frame.ts'
import { valueAt, withGaps } from './piece-lines.ts'
import { excursions, ribbonShapes } from './pit-ribbon.ts'
import { placeBox } from './place-boxes.ts'
import { ruleShapes } from './rules.ts'
import { hatch, staleShapes } from './stale-hatch.ts'
import { cookingPiece, fixtureNow, laneOf, lineOf, plainSay } from './testing/lane-fixture.ts'
import { fitText, textWidth } from './text-width.ts'

const minute = 60_000
const hour = 60 * minute
const style = chartStyle('desk', palettes.night, fontFamily)
const size = { width: 1000, height: 120 }

describe('text width', () => {
  it('gives figures one width, so that columns of them align', () => {
    expect(textWidth('11:11', 10)).toBe(textWidth('04:35', 10))
    expect(textWidth('04:35', 20)).toBeCloseTo(2 * textWidth('04:35', 10))
  })

  it('shortens with an ellipsis only what does not fit', () => {
    expect(fitText('N1', 20, 100)).toBe('N1')
    const short = fitText('Packer by the firebox', 20, 120)
    expect(short.endsWith('…')).toBe(true)
    expect(textWidth(short, 20)).toBeLessThanOrEqual(120)
  })
})

describe('lines', () => {
  it('breaks a line where readings are missing, and nowhere else', () => {
    const whole = lineOf(0, hour, (hours) => 60 + hours)
    expect(withGaps(whole)).toEqual(whole)
    const broken = whole.filter(([at]) => at < 20 * minute || at > 40 * minute)
    expect(withGaps(broken).filter(([, c]) => c === null)).toHaveLength(1)
  })

  it('reads between two points, and nothing in a gap or beyond the ends', () => {
    const line = [
      [0, 10],
      [100, 20],
      [200, null],
      [300, 30],
    ] as const
    expect(valueAt(line, 50)).toBe(15)
    expect(valueAt(line, 100)).toBe(20)
    expect(valueAt(line, 150)).toBeNull()
    expect(valueAt(line, 301)).toBeNull()
    expect(valueAt([], 5)).toBeNull()
  })
})

describe('fan', () => {
  const piece = cookingPiece(1, 7)
  const data = laneOf([piece])
  const frame = laneFrame(data, size, style)

  it('starts at the newest reading and never rises over the pull rule', () => {
    const [outer] = fanShapes(piece, frame, style)
    if (outer?.kind !== 'polygon') throw new Error('the first shape is the outer band')
    expect(outer.points[0]?.[0]).toBeCloseTo(frame.x(fixtureNow))
    expect(outer.points[0]?.[1]).toBeCloseTo(frame.y(piece.latest?.c ?? 0))
    for (const [, y] of outer.points) expect(y).toBeGreaterThanOrEqual(frame.y(piece.pullAtC) - 1e-9)
  })

  it('knows which places it covers', () => {
    const x = frame.x(fixtureNow + 3 * hour)
    const edges = fanEdges(piece, frame)
    expect(fanCover(edges, { x, y: frame.y(79) - 2, width: 40, height: 4 })).toBeGreaterThan(0.8)
    expect(fanCover(edges, { x, y: frame.y(20), width: 60, height: 20 })).toBe(0)
  })

  it('draws nothing where there is no forecast', () => {
    expect(fanShapes({ ...piece, fan: [], pull: null }, frame, style)).toEqual([])
  })
})

describe('pit ribbon', () => {
  const pit = (c: (hours: number) => number) => ({
    line: lineOf(0, 4 * hour, c),
    bands: [{ from: -Infinity, band: { bandLowC: 110, bandHighC: 130 } }],
    silentSince: null,
  })

  it('has no colour while the pit is in its band', () => {
    const calm = pit((hours) => 120 + 9 * Math.sin(hours * 4))
    expect(excursions(calm)).toEqual([])
    const data = laneOf([], { pit: calm })
    const colours = ribbonShapes(calm, laneFrame(data, size, style), style).map((shape) =>
      JSON.stringify(shape),
    )
    expect(
      colours.some((text) => text.includes(palettes.night.amber) || text.includes(palettes.night.red)),
    ).toBe(false)
  })

  it('tells a small excursion from a large one, and one side from the other', () => {
    const found = excursions(pit((hours) => (hours < 1 ? 120 : hours < 2 ? 105 : hours < 3 ? 150 : 120)))
    expect(found.map(({ far, points }) => [far, Math.sign(points[0]?.[1] ?? 0)])).toEqual([
      [false, -1],
      [true, 1],
    ])
  })

  it('leaves a hole where nothing was measured', () => {
    const gap = { ...pit(() => 120), line: pit(() => 120).line.filter(([at]) => at < hour || at > 2 * hour) }
    const data = laneOf([], { pit: gap, window: { from: 0, now: 4 * hour, to: 10 * hour } })
    expect(ribbonShapes(gap, laneFrame(data, size, style), style)).toHaveLength(2)
  })
})

describe('rules', () => {
  it('draws a temperature that several pieces share once, and labels do not touch', () => {
    const data = laneOf([cookingPiece(1, 5), cookingPiece(2, 6)])
    const { labels: shapes, boxes } = ruleShapes(data.pieces, laneFrame(data, size, style), style, plainSay)
    const labels = shapes.filter((shape) => shape.kind === 'text').map((shape) => shape.text)
    expect(labels).toEqual(['pull 203 °F', 'wrap 165 °F'])
    const [pull, wrap] = boxes
    if (pull === undefined || wrap === undefined) throw new Error('both rules have a label')
    expect(placeBox([{ ...wrap, cost: 0 }], [pull], { x: 0, y: 0, ...size })).not.toBeNull()
  })
})

describe('envelope', () => {
  it('spans the coolest and the hottest piece of each moment', () => {
    const cool = cookingPiece(1, 5)
    const hot = cookingPiece(2, 7)
    const slices = envelope([cool, hot], fixtureNow - 10 * hour, fixtureNow)
    const last = slices.at(-1)
    if (last === undefined) throw new Error('there is a last slice')
    expect(last.lowC).toBeCloseTo(valueAt(cool.line, last.at) ?? Number.NaN)
    expect(last.highC).toBeCloseTo(valueAt(hot.line, last.at) ?? Number.NaN)
    // Before the second piece went on there is only the first.
    expect(slices[0]?.lowC).toBe(slices[0]?.highC)
  })
})

describe('stale data and events', () => {
  it('hatches from the last reading to now, and nothing when all are heard', () => {
    const heard = laneOf([cookingPiece(1, 6)])
    const frame = laneFrame(heard, size, style)
    expect(staleShapes(heard, frame, style)).toEqual([])
    const silent = laneOf([cookingPiece(1, 6, { silentSince: fixtureNow - hour })])
    const strokes = staleShapes(silent, frame, style)
    expect(strokes.length).toBeGreaterThan(3)
    for (const stroke of strokes) {
      if (stroke.kind !== 'polyline') throw new Error('hatching is strokes')
      for (const [x] of stroke.points) {
        expect(x).toBeGreaterThanOrEqual(frame.x(fixtureNow - hour) - 1e-6)
        expect(x).toBeLessThanOrEqual(frame.x(fixtureNow) + 1e-6)
      }
    }
  })

  it('cuts every stroke at the sides of its box', () => {
    for (const stroke of hatch({ x: 10, y: 5, width: 40, height: 14 }, style)) {
      if (stroke.kind !== 'polyline') throw new Error('hatching is strokes')
      for (const [x, y] of stroke.points) {
        expect(x >= 10 && x <= 50 && y >= 5 && y <= 19).toBe(true)
      }
    }
  })

  it('puts marks on the piece’s line and the fire on the ribbon', () => {
    const piece = cookingPiece(1, 6)
    const data = laneOf([piece])
    const frame = laneFrame(data, size, style)
    const at = fixtureNow - hour
    const [spritz, fire] = eventShapes(
      [
        { kind: 'spritz', at, pieceId: 1 },
        { kind: 'fire', at, pieceId: null },
        { kind: 'spritz', at: fixtureNow - 30 * hour, pieceId: 1 },
      ],
      [piece],
      frame,
      style,
    )
    if (spritz?.kind !== 'circle') throw new Error('a spritz is a ring')
    expect(spritz.y).toBeCloseTo(frame.y(valueAt(piece.line, at) ?? 0))
    if (fire?.kind !== 'polygon') throw new Error('the fire is a diamond')
    expect(fire.points[0]?.[1]).toBeGreaterThan(frame.plot.y + frame.plot.height)
  })
})
