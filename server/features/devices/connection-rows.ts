import type { Knex } from 'knex'
import { z } from 'zod'
import {
  DeviceErrorKind,
  deviceTransports,
  RejectionReason,
  type DeviceTransport,
} from '#shared/contract/device.ts'

/** How a device is connected, or was last, and what came since. Times in milliseconds since 1970 UTC. */
export interface ConnectionFacts {
  transport: DeviceTransport
  clientId: string | null
  remoteAddress: string | null
  sinceMs: number
  endedAtMs: number | null
  messages: number
  readings: number
  rejected: number
}

export interface ErrorFacts {
  atMs: number
  kind: DeviceErrorKind
  reason: RejectionReason | null
  detail: string
  remoteAddress: string | null
}

export interface KnownOfDevice {
  connection: ConnectionFacts | undefined
  error: ErrorFacts | undefined
}

const Row = z.object({
  device_id: z.int(),
  transport: z.enum(deviceTransports).nullable(),
  client_id: z.string().nullable(),
  remote_address: z.string().nullable(),
  since: z.date().nullable(),
  ended_at: z.date().nullable(),
  messages: z.number(),
  readings: z.number(),
  rejected: z.number(),
  error_at: z.date().nullable(),
  error_kind: DeviceErrorKind.nullable(),
  error_reason: RejectionReason.nullable(),
  error_detail: z.string().nullable(),
  error_address: z.string().nullable(),
})

const maxText = 400

/** What is kept of devices' connections, one row a device. */
export function connectionRows(db: Knex) {
  return {
    async of(deviceIds: readonly number[]): Promise<Map<number, KnownOfDevice>> {
      const rows: unknown = await db('device_connections').whereIn('device_id', deviceIds)
      return new Map(
        z
          .array(Row)
          .parse(rows)
          .map((row) => [row.device_id, { connection: connectionOf(row), error: errorOf(row) }]),
      )
    },

    async saveConnections(facts: readonly (ConnectionFacts & { deviceId: number })[]): Promise<void> {
      if (facts.length === 0) return
      await db.raw(
        `insert into device_connections as c (device_id, transport, client_id, remote_address, since, ended_at,
           messages, readings, rejected)
         select id, transport, nullif(client_id, ''), nullif(remote_address, ''), since,
           nullif(ended_at, '')::timestamptz, messages, readings, rejected
         from unnest(?::int[], ?::text[], ?::text[], ?::text[], ?::timestamptz[], ?::text[], ?::bigint[], ?::bigint[],
           ?::bigint[])
           as s (id, transport, client_id, remote_address, since, ended_at, messages, readings, rejected)
         on conflict (device_id) do update set transport = excluded.transport, client_id = excluded.client_id,
           remote_address = excluded.remote_address, since = excluded.since, ended_at = excluded.ended_at,
           messages = excluded.messages, readings = excluded.readings, rejected = excluded.rejected`,
        [
          facts.map(({ deviceId }) => deviceId),
          facts.map(({ transport }) => transport),
          facts.map(({ clientId }) => storable(clientId)),
          facts.map(({ remoteAddress }) => storable(remoteAddress)),
          facts.map(({ sinceMs }) => new Date(sinceMs).toISOString()),
          facts.map(({ endedAtMs }) => (endedAtMs === null ? '' : new Date(endedAtMs).toISOString())),
          facts.map(({ messages }) => messages),
          facts.map(({ readings }) => readings),
          facts.map(({ rejected }) => rejected),
        ],
      )
    },

    async saveErrors(facts: readonly (ErrorFacts & { deviceId: number })[]): Promise<void> {
      if (facts.length === 0) return
      await db.raw(
        `insert into device_connections as c (device_id, error_at, error_kind, error_reason, error_detail,
           error_address)
         select id, at, kind, nullif(reason, ''), detail, nullif(address, '')
         from unnest(?::int[], ?::timestamptz[], ?::text[], ?::text[], ?::text[], ?::text[])
           as s (id, at, kind, reason, detail, address)
         on conflict (device_id) do update set error_at = excluded.error_at, error_kind = excluded.error_kind,
           error_reason = excluded.error_reason, error_detail = excluded.error_detail,
           error_address = excluded.error_address`,
        [
          facts.map(({ deviceId }) => deviceId),
          facts.map(({ atMs }) => new Date(atMs).toISOString()),
          facts.map(({ kind }) => kind),
          facts.map(({ reason }) => reason ?? ''),
          facts.map(({ detail }) => storable(detail)),
          facts.map(({ remoteAddress }) => storable(remoteAddress)),
        ],
      )
    },

    /** Nobody is connected to a server that has just started: what was connected ended when it was last heard. */
    async endAll(): Promise<void> {
      await db.raw(
        `update device_connections c set ended_at = greatest(c.since, d.last_seen_at)
         from devices d where d.id = c.device_id and c.ended_at is null and c.transport <> 'http'`,
      )
    },
  }
}

function connectionOf(row: z.infer<typeof Row>): ConnectionFacts | undefined {
  if (row.transport === null || row.since === null) return undefined
  return {
    transport: row.transport,
    clientId: row.client_id,
    remoteAddress: row.remote_address,
    sinceMs: row.since.getTime(),
    endedAtMs: row.ended_at?.getTime() ?? null,
    messages: row.messages,
    readings: row.readings,
    rejected: row.rejected,
  }
}

function errorOf(row: z.infer<typeof Row>): ErrorFacts | undefined {
  if (row.error_at === null || row.error_kind === null) return undefined
  return {
    atMs: row.error_at.getTime(),
    kind: row.error_kind,
    reason: row.error_reason,
    detail: row.error_detail ?? '',
    remoteAddress: row.error_address,
  }
}

/** PostgreSQL's text holds every character but NUL; nothing is kept as an empty text. */
function storable(text: string | null): string {
  return text?.slice(0, maxText).replaceAll('\0', '\uFFFD') ?? ''
}
