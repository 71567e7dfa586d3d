import type { Random } from '#shared/domain/random.ts'
import { DateTime } from 'luxon'

import type { PieceFact } from '../story.ts'
import type { DemoSite } from './house.ts'

/** Who logged it: the pitmaster in the evening and the morning, the night hand between, the pitmaster at the board. */
export function whoIsOn(site: Pick<DemoSite, 'timeZone'>, atMs: number, fact: { kind: string }): string {
  const { hour } = DateTime.fromMillis(atMs, { zone: site.timeZone })
  const night = hour >= 21 || hour < 6
  return night && fact.kind !== 'sliced' ? 'wren@quarryroad.example' : 'odell@quarryroad.example'
}

/** What somebody added in words, now and then. */
export function crewNote(fact: PieceFact, random: Random): string | undefined {
  const choices = words[fact.kind]
  if (choices === undefined || random.uniform() >= 0.3) return undefined
  return choices[Math.floor(random.uniform() * choices.length)]
}

const words: Partial<Record<PieceFact['kind'], readonly string[]>> = {
  on: [
    'Thick point, fat side down.',
    'A thin flat: goes on the cool end.',
    'Rubbed last night, dry to the touch.',
    'Straight from the walk-in.',
    'Wood is a bit green tonight.',
  ],
  spritz: ['Edges looking dry.', 'Half water, half cider vinegar.'],
  wrap: [
    'Bark set hard, good colour.',
    'Bark still soft on the fat side.',
    'Sat a while before I got to it.',
    'Flat end was dry, gave it some tallow.',
  ],
  probe_reseated: ['Tip had worked out to the edge.', 'Pushed it back into the thick of the flat.'],
  moved: ['Making room.', 'Fire would not hold.'],
  pull: [
    'Probe slides in all along the flat.',
    'Point tender, flat just about.',
    'Jiggles like it should.',
    'A bit tight at the thin end.',
  ],
  hold: ['Back of the cabinet, second shelf.', 'Wrapped again before it went in.'],
  sliced: [
    'Held its juice well.',
    'Thin end went to chopped.',
    'First slices a touch dry.',
    'Best of the night.',
  ],
}
