import { describe, expect, it } from 'vitest'
import { wallPages } from './wall-pages.ts'

const lanes = (count: number) => Array.from({ length: count }, (_, i) => i + 1)

describe('wallPages', () => {
  it('keeps up to eight lanes on one page', () => {
    expect(wallPages(lanes(8), () => false)).toEqual([lanes(8)])
    expect(wallPages([], () => false)).toEqual([[]])
  })

  it('turns pages beyond that, each lane on one of them', () => {
    const pages = wallPages(lanes(18), () => false)
    expect(pages.map((page) => page.length)).toEqual([8, 8, 2])
    expect(pages.flat()).toEqual(lanes(18))
  })

  it('keeps a lane with something abnormal on every page, in the wall’s order', () => {
    const pages = wallPages(lanes(12), (lane) => lane === 3 || lane === 11)
    for (const page of pages) {
      expect(page).toEqual(expect.arrayContaining([3, 11]))
      expect(page).toEqual([...page].sort((a, b) => a - b))
      expect(page.length).toBeLessThanOrEqual(8)
    }
    expect(new Set(pages.flat())).toEqual(new Set(lanes(12)))
  })

  it('lets the abnormal come first when they alone fill a page', () => {
    const pages = wallPages(lanes(12), (lane) => lane > 2)
    expect(pages[0]).toEqual([3, 4, 5, 6, 7, 8, 9, 10])
    expect(pages.flat()).toHaveLength(12)
  })
})
