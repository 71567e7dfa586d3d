import type { Knex } from 'knex'
import type { Fleet } from './devices/fleet.ts'
import type { KnownDevice } from './house/devices.ts'
import { compareRows, type Comparison } from './house/stored-rows.ts'
import type { Report } from './report.ts'

/** A fleet and whose boxes they are. */
export interface FleetOf {
  fleet: Fleet
  devices: readonly KnownDevice[]
}

/**
 * Ends the sampling, waits until the boxes have everything acknowledged, and claims that exactly what was sent is in
 * the database.
 */
export async function checkRows(report: Report, db: Knex, fleets: readonly FleetOf[]): Promise<Comparison> {
  const sent = await Promise.all(
    fleets.map(async ({ fleet, devices }) => ({
      plans: fleet.plans,
      devices,
      samples: await fleet.finish(),
    })),
  )
  const found = await compareRows(db, sent)
  const counts = await Promise.all(fleets.map(({ fleet }) => fleet.counts()))
  const sum = (of: (one: (typeof counts)[number]) => number) =>
    counts.reduce((total, one) => total + of(one), 0)
  report.figure('messages sent', `${sum(({ sent }) => sent)}, and ${sum((one) => one.sentAgain)} once more`)
  report.check(
    'the rows are exactly the (channel, time) pairs sent',
    found.expected > 0 && found.missing === 0 && found.foreign === 0 && found.stored === found.expected,
    `${found.stored} rows of ${found.expected}, ${found.missing} missing, ${found.foreign} foreign`,
  )
  report.check(
    'the roll-ups are what the rows give',
    found.wrongMinutes === 0,
    `${found.wrongMinutes} minutes wrong`,
  )
  if (found.elsewhere > 0) report.figure('rows of other devices', found.elsewhere)
  report.check('nothing was rejected', found.rejected === 0, `${found.rejected}`)
  return found
}
