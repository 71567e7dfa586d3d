import knex, { type Knex } from 'knex'
import pg from 'pg'

// Dates stay text, as they are stored: a Date would put them into a time zone that they do not have.
pg.types.setTypeParser(pg.types.builtins.DATE, (text) => text)
// Counts fit into a double far beyond anything stored here.
pg.types.setTypeParser(pg.types.builtins.INT8, Number)

const ignore = () => undefined

/** Opens a pool. Whoever opens it calls `destroy()`. */
export function openDatabase(url: string, options: { max?: number } = {}): Knex {
  return knex({
    client: 'pg',
    connection: { connectionString: url, application_name: 'coalhand' },
    pool: { min: 2, max: options.max ?? 12, idleTimeoutMillis: 60_000 },
    acquireConnectionTimeout: 5_000,
    // Knex writes to the console what its callers are told as errors anyway, once a connection that fails.
    log: { warn: ignore, error: ignore, deprecate: ignore, debug: ignore },
  })
}
