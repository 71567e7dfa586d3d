import type { Knex } from 'knex'
import { z } from 'zod'
import { CookerKindName, type Cooker, type CookerChange, type NewCooker } from '#shared/contract/cooker.ts'

const CookerRow = z.object({
  id: z.int(),
  version: z.int(),
  site: z.string(),
  name: z.string(),
  kind: CookerKindName,
  capacity: z.int(),
  position: z.int(),
  pitSetC: z.number(),
  bandLowC: z.number(),
  bandHighC: z.number(),
  pitChannelId: z.int().nullable(),
})

const ChannelUse = z.object({
  label: z.string(),
  cookerId: z.int().nullable(),
  piece: z.string().nullable(),
})
/** Where a channel's probe is: in a piece (by its label), on a pit, or nowhere; and what to call it. */
export type ChannelUse = z.infer<typeof ChannelUse>

/** Cookers and the probes that read their pits. Retired cookers are not seen here. */
export function cookerRepository(db: Knex) {
  const select = () =>
    db('cookers')
      .join('sites', 'sites.id', 'cookers.site_id')
      .whereNull('cookers.retired_at')
      .select('cookers.id', 'version', 'cookers.name', 'kind', 'capacity', 'position', {
        site: 'sites.slug',
        pitSetC: 'pit_set_c',
        bandLowC: 'band_low_c',
        bandHighC: 'band_high_c',
        pitChannelId: db.raw(`(
          select channel_id from probe_placements
          where cooker_id = cookers.id and role = 'pit' and upper_inf(during)
          order by lower(during) desc limit 1)`),
      })

  return {
    async ofSite(siteId: number): Promise<Cooker[]> {
      return z
        .array(CookerRow)
        .parse(await select().where('site_id', siteId).orderBy(['position', 'cookers.id']))
    },

    async byId(id: number): Promise<Cooker | undefined> {
      const row: unknown = await select().where('cookers.id', id).first()
      return row === undefined ? undefined : CookerRow.parse(row)
    },

    /** Locks a cooker's row until the transaction ends. */
    async lock(id: number): Promise<void> {
      await db('cookers').where({ id }).forNoKeyUpdate().select('id')
    },

    /** At the end of the wall's order. @returns its number */
    async add(siteId: number, cooker: NewCooker): Promise<number> {
      const rows: unknown = await db('cookers')
        .insert({
          ...columnsOf(cooker),
          site_id: siteId,
          position: db.raw('(select coalesce(max(position), 0) + 1 from cookers where site_id = ?)', [
            siteId,
          ]),
        })
        .returning('id')
      const [row] = z.tuple([z.object({ id: z.int() })]).parse(rows)
      return row.id
    },

    async change(id: number, change: CookerChange): Promise<void> {
      await db('cookers')
        .where({ id })
        .update({ ...columnsOf(change), version: db.raw('version + 1') })
    },

    /** Locks a channel of a site, and says where its probe is now; undefined when the site has no such channel. */
    async lockChannel(siteId: number, channelId: number): Promise<ChannelUse | undefined> {
      const locked = await db('channels')
        .join('devices', 'devices.id', 'device_id')
        .where({ 'channels.id': channelId, site_id: siteId })
        .forNoKeyUpdate('channels')
        .select('channels.id')
      if (locked.length === 0) return undefined
      const row: unknown = await db('channels')
        .join('devices', 'devices.id', 'device_id')
        .leftJoin('probe_placements as placed', (join) =>
          join.on('placed.channel_id', 'channels.id').andOn(db.raw('upper_inf(placed.during)')),
        )
        .leftJoin('pieces', 'pieces.id', 'placed.piece_id')
        .where('channels.id', channelId)
        .first({
          label: db.raw(`'channel ' || channels.number || ' of ' || devices.name`),
          cookerId: 'placed.cooker_id',
          piece: 'pieces.label',
        })
      return ChannelUse.parse(row)
    },

    /** Ends the placement that a cooker's pit has now, at a moment (milliseconds since 1970 UTC). */
    async closePit(cookerId: number, at: number): Promise<void> {
      const open = () =>
        db('probe_placements').where({ cooker_id: cookerId, role: 'pit' }).whereRaw('upper_inf(during)')
      // One that began in this very millisecond has lasted no time: there is nothing to keep of it.
      await open()
        .whereRaw('lower(during) >= ?', [new Date(at)])
        .delete()
      await open().update({ during: db.raw('tstzrange(lower(during), ?)', [new Date(at)]) })
    },

    async openPit(cookerId: number, channelId: number, at: number): Promise<void> {
      await db('probe_placements').insert({
        channel_id: channelId,
        role: 'pit',
        cooker_id: cookerId,
        during: db.raw('tstzrange(?, null)', [new Date(at)]),
      })
    },
  }
}

/** The named fields as columns; those that are left out stay as they are. */
function columnsOf(cooker: CookerChange) {
  const columns = {
    name: cooker.name,
    kind: cooker.kind,
    capacity: cooker.capacity,
    pit_set_c: cooker.pitSetC,
    band_low_c: cooker.bandLowC,
    band_high_c: cooker.bandHighC,
  }
  return Object.fromEntries(Object.entries(columns).filter(([, value]) => value !== undefined))
}
