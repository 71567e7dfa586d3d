import type { Cooker } from '#shared/contract/cooker.ts'
import type { Tonight } from '#shared/contract/site.ts'

import { channelsOf, demoSites } from './demo/house.ts'

/** The id of a free meat probe at a cooker of the demo house; undefined when none is free or none belongs there. */
export function freeProbe(tonight: Tonight, cooker: Pick<Cooker, 'name'>): number | undefined {
  const site = demoSites.find(({ slug }) => slug === tonight.site.slug)
  if (site === undefined) return undefined
  for (const { device, channel } of channelsOf(site, cooker.name, 'meat')) {
    const found = tonight.devices
      .find(({ slug }) => slug === device)
      ?.channels.find(({ number }) => number === channel)
    if (found?.placedIn === null) return found.id
  }
  return undefined
}

/** Whether a channel belongs to the site's holding place; a piece without a probe counts as not. */
export function isHoldingChannel(tonight: Tonight, channelId: number | null): boolean {
  const site = demoSites.find(({ slug }) => slug === tonight.site.slug)
  const holding = site?.cookers.find(({ kind }) => kind === 'holding')
  if (site === undefined || holding === undefined) return false
  const names = channelsOf(site, holding.name, 'meat')
  return tonight.devices.some(({ slug, channels }) =>
    channels.some(({ id, number }) => {
      return id === channelId && names.some(({ device, channel }) => device === slug && channel === number)
    }),
  )
}
