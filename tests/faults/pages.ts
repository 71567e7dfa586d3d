import { Problem } from '#shared/contract/common.ts'
import { Health, healthEndpoints } from '#shared/contract/health.ts'
import { sessionEndpoints } from '#shared/contract/session.ts'
import { worldSite, type World } from './house/world.ts'
import { duration, type Report } from './report.ts'

/** How long a page may take to say that it cannot, in ms. */
const patienceMs = 6_000

/** An answer to a request; undefined when none came in time. */
interface Heard {
  what: string
  tookMs: number
  status: number | undefined
  body: unknown
}

/** As on a busy evening: so many pages at once that the server opens every connection it may have. */
export async function openManyPages(world: World, token: string): Promise<void> {
  const opened = Array.from({ length: 60 }, () => ask(world, `/api/sites/${worldSite}/tonight`, as(token)))
  for (const { what, status } of await Promise.all(opened)) {
    if (status !== 200)
      throw new Error(`${what} was answered with ${status ?? 'nothing'} while all was well.`)
  }
}

/**
 * Asks what pages ask, all at once and several times over, while the database is away, and claims that each answer
 * is a plain refusal within seconds.
 */
export async function checkPagesWhileAway(report: Report, world: World, token: string): Promise<void> {
  const channel = world.devices[0]?.channelIds[0] ?? 0
  const paths = [
    sessionEndpoints.house.path,
    '/api/sites',
    `/api/sites/${worldSite}/tonight`,
    `/api/sites/${worldSite}/devices`,
    `/api/channels/${channel}/readings?from=2026-01-01T00:00:00.000Z&to=2026-01-01T10:00:00.000Z`,
  ]
  const heard: Heard[] = []
  for (let round = 0; round < 4; round++) {
    heard.push(
      ...(await Promise.all([
        ...paths.map((path) => ask(world, path, as(token))),
        ask(world, sessionEndpoints.signIn.path, {
          method: 'POST',
          headers: { 'Content-Type': 'application/json' },
          body: JSON.stringify({ email: 'lead@quarryroad.example', password: 'not this one' }),
        }),
      ])),
    )
  }
  const unclear = heard.filter(({ status, body }) => status !== 503 || !Problem.safeParse(body).success)
  const slowest = heard.reduce((a, b) => (a.tookMs > b.tookMs ? a : b))
  report.figure('slowest page', `${slowest.what} ${duration(slowest.tookMs)}`)
  report.check(
    `pages say within ${duration(patienceMs)} that the database is away`,
    unclear.length === 0,
    unclear.length === 0
      ? `${heard.length} answers`
      : counted(unclear.map(({ what, status }) => `${what}: ${status ?? 'no answer'}`)),
  )
  await checkHealth(report, world, false)
}

/** `4 × this, 2 × that`. */
function counted(texts: readonly string[]): string {
  const counts = new Map<string, number>()
  for (const text of texts) counts.set(text, (counts.get(text) ?? 0) + 1)
  return [...counts].map(([text, count]) => `${count} × ${text}`).join(', ')
}

/** Claims what `/api/health` says of the database and of the ingest. */
export async function checkHealth(report: Report, world: World, ok: boolean): Promise<void> {
  const { tookMs, status, body } = await ask(world, healthEndpoints.health.path, {})
  const health = Health.safeParse(body).data
  report.check(
    ok ? 'health says that all is well' : 'health says that the database and the ingest are not well',
    status !== undefined && health?.database.ok === ok && health.ingest.ok === ok,
    `${status ?? 'no answer'} in ${duration(tookMs)}: database ${health?.database.detail ?? '?'}, ingest ${
      health?.ingest.detail ?? '?'
    }, ${health?.ingest.waiting ?? '?'} readings wait`,
  )
}

/** What `/api/health` says; undefined when it says nothing readable. */
export async function readHealth(world: World): Promise<Health | undefined> {
  return Health.safeParse((await ask(world, healthEndpoints.health.path, {})).body).data
}

function as(token: string): RequestInit {
  return { headers: { Authorization: `Bearer ${token}` } }
}

async function ask(world: World, path: string, init: RequestInit): Promise<Heard> {
  const begun = performance.now()
  const what = `${init.method ?? 'GET'} ${path.split('?')[0] ?? ''}`
  try {
    const answer = await fetch(world.server().url + path, {
      ...init,
      signal: AbortSignal.timeout(patienceMs),
    })
    const body: unknown = await answer.json()
    return { what, status: answer.status, body, tookMs: performance.now() - begun }
  } catch {
    return { what, status: undefined, body: undefined, tookMs: performance.now() - begun }
  }
}
