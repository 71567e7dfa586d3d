import { describe, expect, it } from 'vitest'

import { channelsOf, demoPeople, demoRecipes, demoSites, findRecipe, findSite, pieceLabel } from './house.ts'

describe('the demo house', () => {
  it('gives every cooker a pit probe and probes for meat', () => {
    for (const site of demoSites) {
      for (const cooker of site.cookers) {
        expect(channelsOf(site, cooker.name, 'pit')).toHaveLength(1)
        expect(channelsOf(site, cooker.name, 'meat').length).toBeGreaterThanOrEqual(3)
      }
    }
  })

  it('numbers each box’s channels from 1 and names only its own cookers', () => {
    for (const site of demoSites) {
      for (const device of site.devices) {
        expect(device.channels.map(({ number }) => number)).toEqual(
          device.channels.map((_, index) => index + 1),
        )
        for (const { cooker } of device.channels) {
          expect(site.cookers.map(({ name }) => name)).toContain(cooker)
        }
      }
    }
  })

  it('has a fire for every recipe, each pit inside its band', () => {
    const sets = demoSites.flatMap((site) => site.cookers.map(({ pitSetC }) => pitSetC))
    for (const recipe of demoRecipes) expect(sets).toContain(recipe.pitSetC)
    for (const cooker of demoSites.flatMap(({ cookers }) => cookers)) {
      expect(cooker.bandLowC).toBeLessThan(cooker.pitSetC)
      expect(cooker.bandHighC).toBeGreaterThan(cooker.pitSetC)
    }
  })

  it('keeps every address at the invented domain, and one owner', () => {
    for (const { email } of demoPeople) expect(email).toMatch(/@quarryroad\.example$/)
    expect(demoPeople.filter(({ roles }) => roles['quarry-road'].includes('owner'))).toHaveLength(1)
  })

  it('names pieces as the crew says them', () => {
    expect(pieceLabel('N', 2)).toBe('N2')
    expect(pieceLabel('2', 1)).toBe('2a')
  })

  it('finds by slug', () => {
    expect(findRecipe('short-rib')?.name).toBe('Short Rib')
    expect(findRecipe('none-such')).toBeUndefined()
    expect(findSite('mill-yard').name).toBe('Mill Yard')
    expect(() => findSite('none-such')).toThrow(RangeError)
  })
})
