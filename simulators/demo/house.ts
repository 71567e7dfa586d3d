import type { CookerKind, WrapMethod } from '#shared/domain/cooking.ts'
import type { Role } from '#shared/domain/permissions.ts'

import type { Cut } from '../physics/piece-traits.ts'

/** A cooker of the demo house. Temperatures in °C. */
export interface DemoCooker {
  name: string
  /** What the crew's short names of its pieces begin with. */
  mark: string
  kind: CookerKind
  /** Pieces that fit on it. */
  capacity: number
  /** Its place on the wall, from the top. */
  position: number
  pitSetC: number
  bandLowC: number
  bandHighC: number
}

/** A channel of a box: the pit probe of a cooker, or a probe for meat on it. */
export interface DemoChannel {
  number: number
  role: 'pit' | 'meat'
  cooker: string
}

export interface DemoDevice {
  slug: string
  name: string
  /** How often it reports, s. */
  intervalS: number
  channels: DemoChannel[]
}

export interface DemoSite {
  slug: string
  name: string
  timeZone: string
  elevationM: number
  /** For the sun's hours. */
  longitudeDeg: number
  cookers: DemoCooker[]
  devices: DemoDevice[]
}

export interface DemoRecipe {
  slug: string
  name: string
  cured: boolean
  cut: Cut
  pitSetC: number
  wrapAtC: number
  wrapMethod: WrapMethod
  pullAtC: number
  typicalKg: number
  /** Hours from going on to the pull that the house plans with at that pit. */
  plannedHours: number
}

export interface DemoPerson {
  name: string
  email: string
  /** What they do, in the house's words: shown beside the account on the sign-in page. */
  does: string
  roles: Record<'quarry-road' | 'mill-yard', Role[]>
}

/** 225, 250 and 275 °F, the usual sets of the trade, and 150 °F for holding. */
const LOW_C = 107.2
const USUAL_C = 121.1
const HOT_C = 135
const HOLD_C = 65.6

/** The two sites of the invented house. */
export const demoSites: DemoSite[] = [
  {
    slug: 'quarry-road',
    name: 'Quarry Road',
    timeZone: 'America/Chicago',
    elevationM: 221,
    longitudeDeg: -90,
    cookers: [
      cooker(1, 'North Offset', 'N', 'offset', 8, USUAL_C, 11),
      cooker(2, 'South Offset', 'S', 'offset', 8, LOW_C, 11),
      cooker(3, 'Old Rotisserie', 'R', 'rotisserie', 12, HOT_C, 9),
      cooker(4, 'Cabinet One', '1', 'cabinet', 6, USUAL_C, 6),
      cooker(5, 'Holding Cabinet', 'H', 'holding', 16, HOLD_C, 4),
    ],
    devices: [
      box('yard-box', 'Yard Box', pitAndMeat('North Offset', 3), pitAndMeat('South Offset', 3)),
      box('rotisserie-box', 'Rotisserie Box', pitAndMeat('Old Rotisserie', 3)),
      box('cabinet-box', 'Cabinet Box', pitAndMeat('Cabinet One', 3)),
      box('holding-box', 'Holding Box', pitAndMeat('Holding Cabinet', 6)),
    ],
  },
  {
    slug: 'mill-yard',
    name: 'Mill Yard',
    timeZone: 'America/Chicago',
    elevationM: 198,
    longitudeDeg: -90,
    cookers: [
      cooker(1, 'Long Offset', 'L', 'offset', 12, USUAL_C, 11),
      cooker(2, 'Cabinet Two', '2', 'cabinet', 6, LOW_C, 6),
      cooker(3, 'Cabinet Three', '3', 'cabinet', 6, HOT_C, 6),
      cooker(4, 'Holding Room', 'H', 'holding', 30, HOLD_C, 4),
    ],
    devices: [
      box('long-offset-box', 'Long Offset Box', pitAndMeat('Long Offset', 4)),
      box('cabinets-box', 'Cabinets Box', pitAndMeat('Cabinet Two', 3), pitAndMeat('Cabinet Three', 3)),
      box('holding-room-box', 'Holding Room Box', pitAndMeat('Holding Room', 6)),
    ],
  },
]

/** The house's recipes. Targets and hours are common practice; the names are invented. */
export const demoRecipes: DemoRecipe[] = [
  recipe('house-brisket', 'House Brisket', 'packer', USUAL_C, 74, 'paper', 95, 6.2, 13),
  recipe('overnight-low-brisket', 'Overnight Low Brisket', 'packer', LOW_C, 71, 'foil', 94, 5.4, 15),
  {
    ...recipe('peppered-pastrami', 'Peppered Pastrami', 'packer', HOT_C, 74, 'paper', 94, 5.6, 7),
    cured: true,
  },
  recipe('beef-cheeks', 'Beef Cheeks', 'cheek', USUAL_C, 73, 'foil', 96, 2.5, 7),
  recipe('short-rib', 'Short Rib', 'short-rib', HOT_C, 76, 'boat', 96, 2.2, 6.5),
]

/** The people of the invented house and what they may do at each site. */
export const demoPeople: DemoPerson[] = [
  person('Ines Marrow', 'ines', 'owner', ['owner']),
  person('Tobias Finch', 'tobias', 'manager', ['manager']),
  person('Odell Sayer', 'odell', 'pitmaster', ['lead']),
  person('Wren Castell', 'wren', 'night hand', ['crew']),
  person('Pia Lund', 'pia', 'prep', ['prep']),
  person('Ruben Ask', 'ruben', 'engineer', ['engineer']),
]

/** The name over the door. */
export const demoHouseName = 'Quarry Road Smokehouse'

/** A recipe by its slug; undefined for one that the demo house does not have. */
export function findRecipe(slug: string): DemoRecipe | undefined {
  return demoRecipes.find((each) => each.slug === slug)
}

/** A site by its slug; an error for one that the demo house does not have. */
export function findSite(slug: string): DemoSite {
  const site = demoSites.find((each) => each.slug === slug)
  if (site === undefined) throw new RangeError(`The demo house has no site ${slug}.`)
  return site
}

/** The channel of a site's boxes that belongs to a cooker in a role; meat channels in the order of the box. */
export function channelsOf(site: DemoSite, cookerName: string, role: DemoChannel['role']) {
  return site.devices.flatMap((device) =>
    device.channels
      .filter((channel) => channel.cooker === cookerName && channel.role === role)
      .map((channel) => ({ device: device.slug, channel: channel.number })),
  )
}

/** What the crew calls the n-th piece on a cooker: N1, N2 on the North Offset, 2a, 2b in Cabinet Two. */
export function pieceLabel(mark: string, turn: number): string {
  return /\d/.test(mark) ? mark + String.fromCharCode(96 + turn) : mark + String(turn)
}

function cooker(
  position: number,
  name: string,
  mark: string,
  kind: CookerKind,
  capacity: number,
  pitSetC: number,
  margin: number,
): DemoCooker {
  return {
    name,
    mark,
    kind,
    capacity,
    position,
    pitSetC,
    bandLowC: pitSetC - margin,
    bandHighC: pitSetC + margin,
  }
}

function pitAndMeat(name: string, probes: number): Omit<DemoChannel, 'number'>[] {
  const meat = Array.from({ length: probes }, () => ({ role: 'meat' as const, cooker: name }))
  return [{ role: 'pit', cooker: name }, ...meat]
}

function box(slug: string, name: string, ...groups: Omit<DemoChannel, 'number'>[][]): DemoDevice {
  const channels = groups.flat().map((channel, index) => ({ number: index + 1, ...channel }))
  return { slug, name, intervalS: 5, channels }
}

function recipe(
  slug: string,
  name: string,
  cut: Cut,
  pitSetC: number,
  wrapAtC: number,
  wrapMethod: WrapMethod,
  pullAtC: number,
  typicalKg: number,
  plannedHours: number,
): DemoRecipe {
  return {
    slug,
    name,
    cut,
    pitSetC,
    wrapAtC,
    wrapMethod,
    pullAtC,
    typicalKg,
    plannedHours,
    cured: false,
  }
}

function person(name: string, mailbox: string, does: string, roles: Role[]): DemoPerson {
  const email = `${mailbox}@quarryroad.example`
  return { name, email, does, roles: { 'quarry-road': roles, 'mill-yard': roles } }
}
