import type { Device } from '@/shared/contract/device.ts'
import type { CookEvent } from '@/shared/contract/event.ts'
import type { Tonight } from '@/shared/contract/site.ts'

/** The moment the snapshot is of. */
export const snapshotNow = Date.parse('2026-12-02T07:00:00Z')

/** A device with channels of these ids, sending every five seconds. */
export function deviceWith(id: number, channelIds: number[], intervalS = 5): Device {
  return {
    ...{ id, site: 'quarry-road', slug: `box-${id}`, name: `Box ${id}`, intervalS, connection: 'online' },
    ...{ lastSeenAt: null, batteryPercent: null, signalDbm: null },
    channels: channelIds.map((channelId, i) => ({
      id: channelId,
      number: i + 1,
      unit: 'Cel',
      placedIn: null,
    })),
  }
}

/** A night with one cooker, one device of two channels (10 and 11), and a reading of channel 10. */
export function snapshot(change: Partial<Tonight> = {}): Tonight {
  return {
    site: { id: 1, slug: 'quarry-road', name: 'Quarry Road', timeZone: 'America/Chicago', elevationM: 200 },
    now: new Date(snapshotNow).toISOString(),
    services: [],
    cookers: [
      {
        ...{ id: 1, version: 1, site: 'quarry-road', name: 'North Offset', kind: 'offset', capacity: 8 },
        ...{ position: 1, pitSetC: 121, bandLowC: 110, bandHighC: 132, pitChannelId: 10 },
      },
    ],
    pieces: [],
    devices: [deviceWith(1, [10, 11])],
    latest: [{ channelId: 10, at: new Date(snapshotNow).toISOString(), c: 120 }],
    forecasts: [],
    ...change,
  }
}

/** A spritz of piece 1, or its correction. */
export function spritz(id: string, correctsId: string | null = null): CookEvent {
  const at = new Date(snapshotNow).toISOString()
  return {
    ...{ id, pieceId: 1, cookerId: null, happenedAt: at, recordedAt: at, by: null, note: null, correctsId },
    fact: correctsId === null ? { kind: 'spritz' } : { kind: 'withdrawn' },
    correctedById: null,
  }
}
