/** PostgreSQL cannot be had; the message is one sentence that says what to do. */
export class PostgresUnavailable extends Error {
  override name = 'PostgresUnavailable'
}
