import type { Knex } from 'knex'
import { assembleCook, type AssembledCook, type Series } from './assemble-cook.ts'
import {
  cookRecord,
  piecesToForecast,
  finishedPieces,
  type ChannelStretch,
  type CookRecord,
} from './cook-record.ts'

export interface CookSourceDeps {
  db: Knex
  readings: {
    /** A channel minute by minute over a span, corrected. */
    seriesOf: (channelId: number, fromMs: number, toMs: number) => Promise<Series>
  }
}

/** The lines of a piece and of the pits it stood in. */
export interface CookLines {
  core: Series[]
  pit: Series[]
}

export type CookSource = ReturnType<typeof createCookSource>

/** What forecasts are made from: pieces' logs with their readings. */
export function createCookSource({ db, readings }: CookSourceDeps) {
  const linesOf = (stretches: readonly ChannelStretch[], until: number): Promise<Series[]> =>
    Promise.all(
      stretches
        .filter((stretch) => stretch.from < until)
        .map(({ channelId, from, to }) => readings.seriesOf(channelId, from, Math.min(to ?? until, until))),
    )

  /** The readings of a piece and its pits up to a moment, ms since 1970 UTC. */
  const lines = async (record: CookRecord, until: number): Promise<CookLines> => {
    const [core, pit] = await Promise.all([linesOf(record.core, until), linesOf(record.pit, until)])
    return { core, pit }
  }

  return {
    lines,

    /** The pieces of every site that are on a fire now or just off it, by number. */
    toForecast: (): Promise<number[]> => piecesToForecast(db),

    /** Finished pieces that had a probe of their own, oldest first, by number. */
    finished: (): Promise<number[]> => finishedPieces(db),

    /** What is known of a piece's cook but its readings; undefined when it is not on yet. */
    recordOf: (pieceId: number): Promise<CookRecord | undefined> => cookRecord(db, pieceId),

    /** A cook with its readings up to a moment (ms since 1970 UTC), in the model's form. */
    assemble: async (record: CookRecord, until: number): Promise<AssembledCook> =>
      assembleCook(record, await lines(record, until), until),
  }
}
