import type { Router } from 'express'
import { sessionEndpoints, type House } from '#shared/contract/session.ts'
import type { Mount, Person } from '../../http/mount.ts'
import type { RefreshCookie } from './refresh-cookie.ts'
import type { SessionService, Signed } from './service.ts'
import { signInLimit, type SignInLimit } from './sign-in-limit.ts'

export interface SessionRouteDeps {
  sessions: SessionService
  cookie: RefreshCookie
  limit: SignInLimit
  house: () => Promise<House>
  issueTicket: (person: Person) => string
}

export function sessionRoutes(mount: Mount, router: Router, deps: SessionRouteDeps): void {
  const { sessions, cookie, limit } = deps
  const giving = (response: Parameters<RefreshCookie['set']>[0], { session, refreshToken }: Signed) => {
    cookie.set(response, refreshToken)
    return session
  }

  mount(sessionEndpoints.house, () => deps.house())

  router.post(sessionEndpoints.signIn.path, ...signInLimit(limit))
  mount(sessionEndpoints.signIn, async ({ body, response }) => giving(response, await sessions.signIn(body)))

  mount(sessionEndpoints.refresh, async ({ request, response }) => {
    const token = cookie.read(request)
    // Every visitor's page asks this once: nobody being signed in is an answer, not an error.
    return token === undefined ? null : giving(response, await sessions.refresh(token))
  })

  mount(sessionEndpoints.signOut, async ({ request, response }) => {
    await sessions.signOut(cookie.read(request))
    cookie.clear(response)
    return undefined
  })

  mount(sessionEndpoints.setPreferences, ({ person, body }) => sessions.setPreferences(person.userId, body))

  mount(sessionEndpoints.liveTicket, ({ person }) => ({ ticket: deps.issueTicket(person) }))
}
