import { randomUUID } from 'node:crypto'
import pg from 'pg'
import { inject } from 'vitest'

declare module 'vitest' {
  export interface ProvidedContext {
    /** The run's PostgreSQL, signed in to a database that no test uses. */
    postgresUrl: string
  }
}

/** The migrated database that every test's own is copied from. */
export const template = 'coalhand_template'

export interface FreshDatabase {
  /** A connection string, password included. */
  url: string
  /** Removes the database, whoever is still signed in. */
  drop: () => Promise<void>
}

/** A database of the caller's own with every migration in it and not a row of data. */
export async function freshDatabase(): Promise<FreshDatabase> {
  const name = `test_${randomUUID().replaceAll('-', '')}`
  await administer(`create database ${name} template ${template}`)
  return {
    url: urlOfDatabase(inject('postgresUrl'), name),
    drop: () => administer(`drop database if exists ${name} with (force)`),
  }
}

/** The same server and role, another database. */
export function urlOfDatabase(url: string, name: string): string {
  const changed = new URL(url)
  changed.pathname = `/${name}`
  return changed.href
}

async function administer(statement: string): Promise<void> {
  const client = new pg.Client({ connectionString: inject('postgresUrl') })
  await client.connect()
  try {
    await client.query(statement)
  } finally {
    await client.end()
  }
}
