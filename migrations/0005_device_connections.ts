import type { Knex } from 'knex'

/** How each device is or was connected last, what went wrong last, and when its secrets were used. */
export async function up(knex: Knex): Promise<void> {
  await knex.raw(`
    -- One row a device, written now and then: what is true this second is in the server's memory.
    create table device_connections (
      device_id integer primary key references devices on delete cascade,
      transport text check (transport in ('mqtt', 'websocket', 'http')),
      client_id text,
      remote_address text,
      since timestamptz,
      -- Null while it is connected.
      ended_at timestamptz,
      messages bigint not null default 0,
      readings bigint not null default 0,
      rejected bigint not null default 0,
      error_at timestamptz,
      error_kind text,
      -- Of a refused message.
      error_reason text,
      error_detail text,
      error_address text,
      check ((error_at is null) = (error_kind is null))
    );

    alter table device_secrets add column first_used_at timestamptz, add column last_used_at timestamptz;
  `)
}

export async function down(knex: Knex): Promise<void> {
  await knex.raw(`
    alter table device_secrets drop column first_used_at, drop column last_used_at;
    drop table device_connections;
  `)
}
