import { z } from 'zod'
import { roles } from '../domain/permissions.ts'
import { Id, NoBody, Nothing, Slug } from './common.ts'
import { endpoint } from './endpoint.ts'

export const Role = z.enum(roles)
export const UnitSystem = z.enum(['us', 'si'])
export const Theme = z.enum(['night', 'paper', 'system'])
export const Locale = z.enum(['en', 'es'])

/** What a person chose for themselves. */
export const Preferences = z
  .object({ units: UnitSystem, theme: Theme, locale: Locale })
  .meta({ id: 'Preferences' })
export type Preferences = z.infer<typeof Preferences>

export const User = z
  .object({
    id: Id,
    email: z.email(),
    name: z.string(),
    preferences: Preferences,
    /** The sites this person may see, with the roles held there. */
    sites: z.array(z.object({ slug: Slug, name: z.string(), timeZone: z.string(), roles: z.array(Role) })),
  })
  .meta({ id: 'User' })
export type User = z.infer<typeof User>

export const SignIn = z.strictObject({
  email: z.email('Write the address like name@example.com.').max(254),
  password: z.string().min(1, 'Write your password.').max(200),
})
export type SignIn = z.infer<typeof SignIn>

/** A short-lived access token, sent as `Authorization: Bearer …`; the refresh token travels in a cookie only. */
export const Session = z
  .object({ token: z.string(), expiresInS: z.int(), user: User })
  .meta({ id: 'Session' })
export type Session = z.infer<typeof Session>

/** What the sign-in page may know before anyone has signed in. */
export const House = z
  .object({
    name: z.string(),
    build: z.string(),
    /** The accounts of the demo house; null outside the demo. */
    demo: z
      .object({
        password: z.string(),
        accounts: z.array(z.object({ email: z.email(), name: z.string(), does: z.string(), role: Role })),
      })
      .nullable(),
  })
  .meta({ id: 'House' })
export type House = z.infer<typeof House>

const tag = 'Session'

export const sessionEndpoints = {
  house: endpoint({
    method: 'get',
    path: '/api/house',
    tag,
    summary: 'The house’s name, the build, and the demo accounts when this is the demo house',
    access: { kind: 'public' },
    params: Nothing,
    query: Nothing,
    body: NoBody,
    response: House,
    status: 200,
  }),
  signIn: endpoint({
    method: 'post',
    path: '/api/session',
    tag,
    summary: 'Sign in with e-mail and password',
    access: { kind: 'public' },
    params: Nothing,
    query: Nothing,
    body: SignIn,
    response: Session,
    status: 200,
  }),
  refresh: endpoint({
    method: 'post',
    path: '/api/session/refresh',
    tag,
    summary: 'A new access token for the refresh cookie, which is replaced; null where there is no cookie',
    access: { kind: 'public' },
    params: Nothing,
    query: Nothing,
    body: NoBody,
    response: Session.nullable(),
    status: 200,
  }),
  signOut: endpoint({
    method: 'delete',
    path: '/api/session',
    tag,
    summary: 'Sign out on this device',
    access: { kind: 'public' },
    params: Nothing,
    query: Nothing,
    body: NoBody,
    response: NoBody,
    status: 204,
  }),
  setPreferences: endpoint({
    method: 'patch',
    path: '/api/me/preferences',
    tag,
    summary: 'Units, theme and language of the person signed in',
    access: { kind: 'signed-in' },
    params: Nothing,
    query: Nothing,
    body: Preferences.partial().strict(),
    response: User,
    status: 200,
  }),
  liveTicket: endpoint({
    method: 'post',
    path: '/api/live/ticket',
    tag,
    summary: 'A ticket that opens one WebSocket within 30 seconds',
    access: { kind: 'signed-in' },
    params: Nothing,
    query: Nothing,
    body: NoBody,
    response: z.object({ ticket: z.string() }),
    status: 200,
  }),
}
