/** PostgreSQL's server programs: their directory and major version. */
export interface PostgresPrograms {
  directory: string
  version: number
}

/** The newest server programs installed, or those of one major version; undefined when there are none. */
export function findPostgres(wanted?: {
  version?: number
  root?: string
  path?: string
}): PostgresPrograms | undefined
