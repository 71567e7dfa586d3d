import type { Knex } from 'knex'

/** How the jobs of the server went: the queue itself forgets what is done. */
export async function up(knex: Knex): Promise<void> {
  await knex.raw(`
    -- One row a kind and minute; of earlier days only each kind's newest is kept.
    create table job_runs (
      kind text not null,
      minute timestamptz not null,
      runs integer not null,
      failed integer not null,
      last_ended_at timestamptz not null,
      last_ms double precision not null,
      last_error text,
      primary key (kind, minute)
    );
  `)
}

export async function down(knex: Knex): Promise<void> {
  await knex.raw('drop table job_runs')
}
