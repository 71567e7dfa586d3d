import type { Knex } from 'knex'
import type { Cooker, CookerChange, NewCooker } from '#shared/contract/cooker.ts'
import type { LiveChanges } from '#shared/contract/live.ts'
import type { Clock } from '#shared/domain/clock.ts'
import { isUniqueViolation } from '../../db/violations.ts'
import type { Person, SiteContext } from '../../http/mount.ts'
import { badRequest, conflict, notFound, staleVersion, unprocessable } from '../../http/problem.ts'
import { recordAudit } from '../audit/service.ts'
import { cookerRepository } from './repository.ts'

export interface CookerDeps {
  db: Knex
  clock: Clock
  /** Tells those who watch a site what changed there. */
  publish: (siteSlug: string, changes: LiveChanges) => void
}

/** Who changes something, and where. */
export interface By {
  person: Person
  site: SiteContext
}

export type CookerService = ReturnType<typeof createCookerService>

export function createCookerService({ db, clock, publish }: CookerDeps) {
  const get = async (connection: Knex, id: number): Promise<Cooker> => {
    const cooker = await cookerRepository(connection).byId(id)
    if (!cooker) throw notFound()
    return cooker
  }
  const audit = (
    trx: Knex,
    { person, site }: By,
    verb: string,
    cookerId: number,
    data: Record<string, unknown>,
  ) =>
    recordAudit(trx, {
      at: clock.now(),
      userId: person.userId,
      siteId: site.id,
      action: `cooker.${verb}`,
      subject: `cooker ${cookerId}`,
      data,
    })

  return {
    /** In the wall's order. */
    listOfSite: (siteId: number): Promise<Cooker[]> => cookerRepository(db).ofSite(siteId),

    /** @throws HttpProblem 409 when the site has one of that name */
    async add(by: By, cooker: NewCooker): Promise<Cooker> {
      const added = await db.transaction(async (trx) => {
        const id = await namedOnce(cooker.name, cookerRepository(trx).add(by.site.id, cooker))
        await audit(trx, by, 'add', id, cooker)
        return get(trx, id)
      })
      publish(by.site.slug, { cookers: [added] })
      return added
    },

    /** @throws HttpProblem 412 when somebody changed it since `version`, 409 when the name is taken, 400 for a band upside down */
    async change(by: By, id: number, version: number, change: CookerChange): Promise<Cooker> {
      const changed = await db.transaction(async (trx) => {
        const cookers = cookerRepository(trx)
        await cookers.lock(id)
        const before = await get(trx, id)
        if (before.version !== version) throw staleVersion(changedMeanwhile(before))
        if (Object.keys(change).length === 0) return before
        refuseBandUpsideDown(before, change)
        await namedOnce(change.name, cookers.change(id, change))
        await audit(trx, by, 'change', id, { before, change })
        return get(trx, id)
      })
      publish(by.site.slug, { cookers: [changed] })
      return changed
    },

    /**
     * Says which channel reads a cooker's pit from now on, or that none does. The probe leaves the pit that it read
     * before.
     * @throws HttpProblem 422 when the site has no such channel, 409 when its probe is in a piece
     */
    async placeProbe(by: By, id: number, channelId: number | null): Promise<Cooker> {
      const changed = await db.transaction(async (trx) => {
        const cookers = cookerRepository(trx)
        await cookers.lock(id)
        const before = await get(trx, id)
        if (before.pitChannelId === channelId) return [before]
        const left = channelId === null ? undefined : await takeChannel(trx, by, channelId)
        const now = clock.now()
        await cookers.closePit(id, now)
        if (channelId !== null) await cookers.openPit(id, channelId, now)
        await audit(trx, by, 'probe', id, { from: before.pitChannelId, to: channelId })
        const leftCooker = left === undefined ? undefined : await cookers.byId(left)
        return [await get(trx, id), ...(leftCooker ? [leftCooker] : [])]
      })
      publish(by.site.slug, { cookers: changed })
      const [cooker] = changed
      if (!cooker) throw notFound()
      return cooker
    },
  }

  /** Frees a channel from the pit that it reads now. @returns that cooker's number */
  async function takeChannel(trx: Knex, { site }: By, channelId: number): Promise<number | undefined> {
    const cookers = cookerRepository(trx)
    const use = await cookers.lockChannel(site.id, channelId)
    if (!use)
      throw unprocessable('This site has no such channel.', [{ at: 'channelId', message: 'Choose another.' }])
    if (use.piece !== null) {
      throw conflict(`The probe on ${use.label} is in ${use.piece} now. Take it out of the piece first.`, [
        { at: 'channelId', message: `In ${use.piece} now.` },
      ])
    }
    if (use.cookerId === null) return undefined
    await cookers.closePit(use.cookerId, clock.now())
    return use.cookerId
  }
}

/** The contract checks a band that is sent whole; half of one meets the half that is there. */
function refuseBandUpsideDown(before: Cooker, change: CookerChange): void {
  const low = change.bandLowC ?? before.bandLowC
  const high = change.bandHighC ?? before.bandHighC
  if (low < high) return
  const message = 'The low end of the band must lie below the high end.'
  throw badRequest(message, [{ at: change.bandLowC === undefined ? 'bandHighC' : 'bandLowC', message }])
}

function changedMeanwhile(cooker: Cooker): string {
  return `Somebody changed ${cooker.name} since you opened it. Look again, then change it.`
}

async function namedOnce<T>(name: string | undefined, change: Promise<T>): Promise<T> {
  try {
    return await change
  } catch (error) {
    if (!isUniqueViolation(error, 'cookers_site_id_name_key')) throw error
    const message = `There is a cooker called ${name ?? 'that'} already.`
    throw conflict(message, [{ at: 'name', message }])
  }
}
