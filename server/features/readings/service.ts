import type { Knex } from 'knex'
import type { z } from 'zod'
import { readingsTopic } from '#shared/contract/mqtt.ts'
import type { IngestOutcome, Reading, Trace } from '#shared/contract/reading.ts'
import type { SenmlRecord } from '#shared/contract/senml.ts'
import type { LatestReading } from '#shared/contract/site.ts'
import type { Clock } from '#shared/domain/clock.ts'
import { celsiusOf, sensorAt, unitOfSensor, type SensorSpan } from '#shared/domain/sensor.ts'
import type { DeviceIdentity } from '../../http/mount.ts'
import { badRequest, notFound, unavailable } from '../../http/problem.ts'
import { IngestUnavailable, type Ingest } from '../../ingest/ingest.ts'
import type { LinePart } from './cuts.ts'
import { readLines } from './lines.ts'
import { readingRepository } from './repository.ts'
import { resolutionFor } from './resolution.ts'
import { inSequence, traceOf } from './trace.ts'

export interface ReadingDeps {
  db: Knex
  clock: Clock
  /** The sensors that have hung on channels. */
  sensorsOf: (channelIds: readonly number[]) => Promise<Map<number, SensorSpan[]>>
  ingest: Pick<Ingest, 'accept' | 'isFull'>
}

export type ReadingService = ReturnType<typeof createReadingService>

/** A channel's temperature in time: two arrays of one length. */
export interface Series {
  /** Milliseconds since 1970 UTC. */
  at: Float64Array
  /** °C. */
  c: Float64Array
}

const minuteMs = 60 * 1000
/** A reading older than this, in ms, is nobody's present. */
const latestSinceMs = 30 * 24 * 3600 * 1000
/** A device that sends over HTTP is told after this, in ms, that the database is away. */
const patienceMs = 5_000
const sendAgain = 'Readings cannot be stored just now. Send them again.'

export function createReadingService({ db, clock, sensorsOf, ingest }: ReadingDeps) {
  const repository = readingRepository(db)

  /** Each of the lines out of parts that follow each other; null where there is none. */
  const linesThrough = async (lines: readonly LinePart[][], points: number): Promise<(Trace | null)[]> => {
    const sequences = lines.map(inSequence)
    const spans = sequences.map((parts) => (parts.at(-1)?.toMs ?? 0) - (parts[0]?.fromMs ?? 0))
    const resolution = resolutionFor(Math.max(...spans), points)
    const found = await readLines(db, sequences, resolution, sensorsOf)
    return sequences.map((parts, index) => {
      const last = parts.at(-1)
      return last ? traceOf(last.channelId, found[index] ?? [], resolution.stepMs) : null
    })
  }

  return {
    /** Readings of a channel from the newest back. @throws HttpProblem 404 when there is no such channel */
    async ofChannel(
      channelId: number,
      query: {
        from?: string | undefined
        to?: string | undefined
        cursor?: string | undefined
        limit: number
      },
    ): Promise<{ channelId: number; unit: string; items: Reading[]; nextCursor: string | null }> {
      const spans = (await sensorsOf([channelId])).get(channelId)
      if (!spans) throw notFound()
      const toMs = query.to === undefined ? undefined : Date.parse(query.to)
      const found = await repository.ofChannel(channelId, {
        fromMs: query.from === undefined ? undefined : Date.parse(query.from),
        beforeMs: query.cursor === undefined ? toMs : momentOf(query.cursor),
        limit: query.limit + 1,
      })
      const items = found.slice(0, query.limit)
      const kind = sensorAt(spans, clock.now())?.kind ?? spans[0]?.sensor.kind ?? 'digital'
      return {
        channelId,
        unit: unitOfSensor(kind),
        items: items.map(({ atMs, value, receivedAtMs }) => {
          const sensor = sensorAt(spans, atMs)
          return {
            at: new Date(atMs).toISOString(),
            value,
            receivedAt: new Date(receivedAtMs).toISOString(),
            celsius: (sensor && celsiusOf(sensor, value)) ?? null,
          }
        }),
        nextCursor: found.length > query.limit ? String(items.at(-1)?.atMs) : null,
      }
    },

    /** The newest reading of each channel, corrected; channels without one are left out. */
    async latestOf(channelIds: readonly number[]): Promise<LatestReading[]> {
      const [found, sensors] = await Promise.all([
        repository.latest(channelIds, clock.now() - latestSinceMs),
        sensorsOf(channelIds),
      ])
      return found.flatMap(({ channelId, atMs, value }) => {
        const sensor = sensorAt(sensors.get(channelId) ?? [], atMs)
        const c = sensor && celsiusOf(sensor, value)
        return c === undefined ? [] : [{ channelId, at: new Date(atMs).toISOString(), c }]
      })
    },

    /**
     * Lines of a site's channels over a span, at most `points` a line: those named, or all whose probe was somewhere.
     * @throws HttpProblem 400 when the span ends before it begins
     */
    async tracesOfSite(
      siteId: number,
      query: { from: string; to: string; channels?: string | undefined; points: number },
    ): Promise<{ from: string; to: string; traces: Trace[] }> {
      const fromMs = Date.parse(query.from)
      const toMs = Date.parse(query.to)
      if (!(fromMs < toMs)) throw badRequest('The span must end after it begins.')
      const channelIds =
        query.channels === undefined
          ? await repository.channelsPlaced(siteId, fromMs, toMs)
          : await repository.channelsOfSite(siteId, query.channels.split(',').map(Number))
      const traces = await this.traceOfChannels(channelIds, { fromMs, toMs, points: query.points })
      return { from: query.from, to: query.to, traces }
    },

    /** Lines of channels over a span, from the readings or the roll-up that fits. */
    async traceOfChannels(
      channelIds: readonly number[],
      { fromMs, toMs, points }: { fromMs: number; toMs: number; points: number },
    ): Promise<Trace[]> {
      const resolution = resolutionFor(toMs - fromMs, points)
      const lines = channelIds.map((channelId) => [{ channelId, fromMs, toMs }])
      const found = await readLines(db, lines, resolution, sensorsOf)
      return channelIds.map((channelId, index) => traceOf(channelId, found[index] ?? [], resolution.stepMs))
    },

    /** A piece's own temperature and that of the pits it stood in, each null where no probe was. */
    async traceOfPiece(
      pieceId: number,
      { points }: { points: number },
    ): Promise<{ core: Trace | null; pit: Trace | null }> {
      const parts = await repository.partsOfPiece(pieceId, clock.now())
      if (!parts) return { core: null, pit: null }
      const [core = null, pit = null] = await linesThrough([parts.core, parts.pit], points)
      return { core, pit }
    },

    /** A channel minute by minute, the mean of each, from the oldest on; minutes without a reading are left out. */
    async seriesOf(channelId: number, fromMs: number, toMs: number): Promise<Series> {
      const eachMinute = { source: 'minutes', stepMs: minuteMs } as const
      const [points = []] = await readLines(db, [[{ channelId, fromMs, toMs }]], eachMinute, sensorsOf)
      return {
        at: Float64Array.from(points, ({ atMs }) => atMs),
        c: Float64Array.from(points, ({ celsius }) => celsius),
      }
    },

    /** Stores a pack of a device that has no MQTT. @throws HttpProblem 503 when it cannot be stored just now */
    async send(device: DeviceIdentity, pack: readonly SenmlRecord[]): Promise<z.infer<typeof IngestOutcome>> {
      const topic = readingsTopic(device.siteSlug, device.deviceSlug)
      // What waits already would only grow: each try of a device that is told to come again is a new one.
      if (ingest.isFull()) throw unavailable(sendAgain)
      try {
        return await withPatience(ingest.accept({ device, topic, payload: pack }))
      } catch (error) {
        if (error instanceof IngestUnavailable) throw unavailable(sendAgain)
        throw error
      }
    },
  }
}

/** What was taken may still be stored later; sending it again does no harm. */
function withPatience<T>(outcome: Promise<T>): Promise<T> {
  return new Promise((resolve, reject) => {
    const timer = setTimeout(() => reject(new IngestUnavailable('It takes too long.')), patienceMs)
    outcome.then(resolve, reject).finally(() => clearTimeout(timer))
  })
}

function momentOf(cursor: string): number {
  const ms = Number(cursor)
  if (!Number.isSafeInteger(ms) || Math.abs(ms) > 8.64e15)
    throw badRequest('That cursor is not one of this list.')
  return ms
}
