import type { Knex } from 'knex'

/** Readings as sent, in weekly partitions; their one-minute roll-up; and what could not be taken. */
export async function up(knex: Knex): Promise<void> {
  await knex.raw(`
    -- No foreign key to channels: the ingest resolves channels itself, and a check a row would halve its speed.
    create table readings (
      channel_id integer not null,
      at timestamptz not null,
      value double precision not null,
      received_at timestamptz not null,
      primary key (channel_id, at)
    ) partition by range (at);

    create table readings_1m (
      channel_id integer not null,
      minute timestamptz not null,
      low double precision not null,
      high double precision not null,
      total double precision not null,
      count integer not null,
      last double precision not null,
      last_at timestamptz not null,
      primary key (channel_id, minute)
    -- Each row is changed many times within its minute: with room on the page that costs no new index entry.
    ) with (fillfactor = 80);

    create table rejected_messages (
      id bigint generated always as identity primary key,
      device_id integer references devices,
      received_at timestamptz not null,
      topic text not null,
      reason text not null,
      detail text not null,
      payload text not null
    );
    create index rejected_messages_device on rejected_messages (device_id, id desc);

    -- Every rejection counts here, also beyond the number of which the message itself is kept.
    create table rejection_counts (
      device_id integer not null references devices,
      day date not null,
      count bigint not null,
      primary key (device_id, day)
    );
  `)
}

export async function down(knex: Knex): Promise<void> {
  await knex.raw('drop table rejection_counts, rejected_messages, readings_1m, readings')
}
