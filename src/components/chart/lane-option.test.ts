import { describe, expect, it } from 'vitest'
import { z } from 'zod'
import { fontFamily, palettes, themeNames } from '@/assets/tokens.ts'
import { chartStyle } from './chart-style.ts'
import type { LaneForm } from './chart-style.ts'
import type { LaneData } from './lane-data.ts'
import { laneOption } from './lane-option.ts'
import type { LaneDrawing } from './lane-option.ts'
import { overlaps, within } from './place-boxes.ts'
import { cookingPiece, fixtureNow, laneOf, plainSay, restingPiece } from './testing/lane-fixture.ts'

const hour = 3_600_000
const sizes: Record<LaneForm, { width: number; height: number }> = {
  wall: { width: 1560, height: 150 },
  desk: { width: 1150, height: 120 },
  phone: { width: 328, height: 110 },
  cook: { width: 900, height: 380 },
}

function draw(data: LaneData, form: LaneForm = 'wall', size = sizes[form]): LaneDrawing {
  return laneOption({
    data,
    size,
    style: chartStyle(form, palettes.night, fontFamily),
    say: plainSay,
    ticks: [{ at: fixtureNow - hour, midnight: true }],
  })
}

function textsOf(drawing: LaneDrawing): string[] {
  return drawing.labels.flatMap((label) =>
    label.shapes.flatMap((shape) => (shape.kind === 'text' ? [shape.text] : [])),
  )
}

function expectClear(drawing: LaneDrawing): void {
  const { labels, frame } = drawing
  labels.forEach((label, i) => {
    expect(within(label.box, { x: 0, y: 0, width: frame.width, height: frame.height })).toBe(true)
    for (const other of labels.slice(i + 1)) expect(overlaps(label.box, other.box)).toBe(false)
  })
}

describe('laneOption', () => {
  it('names each piece at its end and gives its pull with the interval', () => {
    const texts = textsOf(draw(laneOf([cookingPiece(1, 7)])))
    expect(texts).toContain('N1')
    expect(texts.some((text) => text.includes('°F'))).toBe(true)
    expect(texts).toContain('06:46')
    expect(texts).toContain('05:55 to 08:10')
  })

  it.each(['wall', 'desk', 'phone', 'cook'] as const)('lets no label touch another (%s)', (form) => {
    for (let count = 1; count <= 6; count++) {
      const pieces = Array.from({ length: count }, (_, i) => cookingPiece(i + 1, 3 + i * 1.4))
      expectClear(draw(laneOf(pieces), form))
      expectClear(draw(laneOf([...pieces, restingPiece(20), restingPiece(21)]), form))
    }
  })

  it('keeps labels apart in the lowest lane of a full wall', () => {
    const pieces = [cookingPiece(1, 7), cookingPiece(2, 7.1), cookingPiece(3, 4)]
    expectClear(draw(laneOf(pieces), 'wall', { width: 1560, height: 92 }))
  })

  it('names pieces at the same temperature apart from each other', () => {
    const drawing = draw(laneOf([cookingPiece(1, 7), cookingPiece(2, 7)]))
    expectClear(drawing)
    expect(drawing.folded).toBe(false)
    expect(textsOf(drawing)).toEqual(expect.arrayContaining(['N1', 'N2']))
  })

  it('folds more than six pieces and says the first and the last due', () => {
    const pieces = Array.from({ length: 12 }, (_, i) => cookingPiece(i + 1, 4 + i * 0.4))
    const drawing = draw(laneOf(pieces))
    expect(drawing.folded).toBe(true)
    const texts = textsOf(drawing)
    expect(texts).toEqual(expect.arrayContaining(['pieces 12', 'first', 'N12', 'last', 'N1']))
    expectClear(drawing)
  })

  it('says in words why there is no forecast', () => {
    const unknown = cookingPiece(1, 0.3, { fan: [], wrap: null, pull: null, reason: 'too-little-data' })
    expect(textsOf(draw(laneOf([unknown])))).toContain('too-little-data')
  })

  it('says how long a probe has been silent instead of its last value', () => {
    const silent = cookingPiece(1, 6, { silentSince: fixtureNow - 12 * 60_000 })
    const texts = textsOf(draw(laneOf([silent])))
    expect(texts).toContain('silent 12 min')
    expect(texts.some((text) => text.includes('°F'))).toBe(false)
  })

  it('says that the service is at risk with a word, not by colour alone', () => {
    expect(textsOf(draw(laneOf([cookingPiece(1, 5, { risk: 'now' })])))).toContain('now')
  })

  it('shows rest and hold as rows after the pull', () => {
    const held = restingPiece(2, { stage: 'holding', holdAt: fixtureNow - hour })
    const texts = textsOf(draw(laneOf([restingPiece(1), held])))
    expect(texts).toContain('resting 120 min')
    expect(texts).toContain('held 60 min')
  })

  it('has a series for every part, with the same data in both themes', () => {
    const drawn = themeNames.map((theme) =>
      laneOption({
        data: laneOf([cookingPiece(1, 6)]),
        size: sizes.desk,
        style: chartStyle('desk', palettes[theme], fontFamily),
        say: plainSay,
        ticks: [],
      }),
    )
    const parts = [
      'clock',
      'fans',
      'rules',
      'envelope',
      'piece-1',
      'ribbon',
      'bars',
      'stale',
      'marks',
      'labels',
    ]
    for (const { option } of drawn) {
      const ids = z
        .array(z.object({ id: z.string() }))
        .parse(option['series'])
        .map(({ id }) => id)
      expect(ids.toSorted()).toEqual(parts.toSorted())
    }
  })
})
