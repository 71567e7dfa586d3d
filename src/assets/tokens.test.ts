import { describe, expect, it } from 'vitest'
import { contrast, layOver } from './contrast.ts'
import { cssVariables, palettes, themeNames } from './tokens.ts'

describe('contrast', () => {
  it('is 21 for black on white and 1 for a colour on itself', () => {
    expect(contrast('#000000', '#ffffff')).toBeCloseTo(21, 10)
    expect(contrast('#7f8d95', '#7f8d95')).toBe(1)
  })

  it('puts #767676 just above and #777777 just below 4.5 on white', () => {
    // From memory: these two greys are the usual example of the 4.5:1 limit of WCAG 1.4.3.
    expect(contrast('#767676', '#ffffff')).toBeGreaterThan(4.5)
    expect(contrast('#777777', '#ffffff')).toBeLessThan(4.5)
  })

  it('refuses what it cannot read', () => {
    expect(() => contrast('grey', '#ffffff')).toThrow(RangeError)
  })
})

describe.each(themeNames)('the %s theme', (name) => {
  const palette = palettes[name]
  const surfaces = [palette.ground, palette.raised]
  const covered = surfaces.flatMap((surface) => [
    layOver(palette.hover, surface),
    layOver(palette.pressed, surface),
  ])

  it.each(['text', 'quiet', 'link', 'linkHover', 'linkPressed', 'amber', 'red'] as const)(
    'has %s at 4.5:1 or better on every surface (WCAG 2.2, 1.4.3)',
    (colour) => {
      for (const surface of [...surfaces, ...covered]) {
        expect(contrast(palette[colour], surface)).toBeGreaterThanOrEqual(4.5)
      }
    },
  )

  it('keeps marks at 3:1 or better (WCAG 2.2, 1.4.11)', () => {
    for (const surface of surfaces) expect(contrast(palette.mark, surface)).toBeGreaterThanOrEqual(3)
  })

  it('keeps text on filled controls at 4.5:1 or better', () => {
    for (const fill of [palette.link, palette.linkHover, palette.linkPressed]) {
      expect(contrast(palette.onLink, fill)).toBeGreaterThanOrEqual(4.5)
    }
  })

  it('keeps a flag’s text readable over the forecast’s fan', () => {
    for (const surface of surfaces) {
      const fan = layOver(palette.fanInner, layOver(palette.fanOuter, surface))
      expect(contrast(palette.text, fan)).toBeGreaterThanOrEqual(4.5)
    }
  })

  it('names its variables in CSS’s way', () => {
    expect(cssVariables(name)['--fan-outer']).toBe(palette.fanOuter)
    expect(cssVariables(name)['--ground']).toBe(palette.ground)
  })
})
