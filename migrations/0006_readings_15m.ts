import type { Knex } from 'knex'

/** A second, coarser roll-up for long spans; which quarters of an hour it lacks; and which weeks are no more. */
export async function up(knex: Knex): Promise<void> {
  await knex.raw(`
    create table readings_15m (
      channel_id integer not null,
      quarter timestamptz not null,
      low double precision not null,
      high double precision not null,
      total double precision not null,
      count integer not null,
      last double precision not null,
      last_at timestamptz not null,
      primary key (channel_id, quarter)
    );

    -- Quarters of an hour that have readings which readings_15m does not count yet.
    create table readings_due (
      channel_id integer not null,
      quarter timestamptz not null,
      primary key (channel_id, quarter)
    );

    -- Weekly partitions of readings that are past the retention: given up before they are dropped, so that a drop
    -- that was broken off is finished, and nobody looks there for readings.
    create table readings_given_up (
      partition text primary key,
      from_at timestamptz not null,
      to_at timestamptz not null,
      dropped boolean not null default false
    );

    insert into readings_due (channel_id, quarter)
    select distinct channel_id, date_bin('15 minutes', minute, '2000-01-01 00:00:00+00') from readings_1m;
  `)
}

export async function down(knex: Knex): Promise<void> {
  await knex.raw('drop table readings_given_up, readings_due, readings_15m')
}
