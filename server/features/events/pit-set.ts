import type { Knex } from 'knex'
import { z } from 'zod'
import type { CookEvent } from '#shared/contract/event.ts'
import { effectiveEvents } from '#shared/domain/effective-events.ts'
import { eventsRepository, type PitSetChange } from './repository.ts'

/** What a cooker's pit is set to, °C. */
export async function pitSetOf(trx: Knex, cookerId: number): Promise<number> {
  const row: unknown = await trx('cookers').where({ id: cookerId }).forNoKeyUpdate().first('pit_set_c')
  return z.object({ pit_set_c: z.number() }).parse(row).pit_set_c
}

/**
 * Lets a cooker follow a change of its pit's set that was just logged, corrected or taken back. Only the newest
 * change says what the pit is set to now: a late entry about something earlier leaves it alone, and so does taking
 * back a change that somebody has set otherwise since. The band keeps its distance to the set.
 */
export async function applyPitSet(trx: Knex, cookerId: number, news: CookEvent): Promise<void> {
  const changes = await eventsRepository(trx).pitSetChanges([cookerId])
  const newest = effectiveEvents(changes).at(-1)
  if (news.fact.kind === 'pit_set') {
    if (newest?.id === news.id) await setPit(trx, cookerId, news.fact.pitSetC)
    return
  }
  const takenBack = changes.find((change) => change.id === news.correctsId)
  if (takenBack?.fact.kind !== 'pit_set' || takenBack.pitSetBeforeC === null) return
  if (newest && isLater(newest, takenBack)) return
  if ((await pitSetOf(trx, cookerId)) !== takenBack.fact.pitSetC) return
  await setPit(trx, cookerId, takenBack.pitSetBeforeC)
}

function isLater(one: PitSetChange, other: PitSetChange): boolean {
  return one.happenedAt > other.happenedAt
}

async function setPit(trx: Knex, cookerId: number, pitSetC: number): Promise<void> {
  await trx.raw(
    `update cookers set pit_set_c = :pitSetC, version = version + 1,
       band_low_c = band_low_c + (:pitSetC - pit_set_c), band_high_c = band_high_c + (:pitSetC - pit_set_c)
     where id = :cookerId and pit_set_c <> :pitSetC`,
    { cookerId, pitSetC },
  )
}
