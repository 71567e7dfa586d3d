import { defineStore } from 'pinia'
import { computed, shallowRef } from 'vue'
import { ApiProblem } from '@/api/api-problem.ts'
import { call, client } from '@/api/client.ts'
import { sessionEndpoints, type Session, type SignIn, type User } from '@/shared/contract/session.ts'
import { may as matrixAllows, type Action } from '@/shared/domain/permissions.ts'
import { usePreferences } from './preferences.ts'

export type SiteMembership = User['sites'][number]

/** Who is signed in on this device, and what they may do where. */
export const useSession = defineStore('session', () => {
  const preferences = usePreferences()
  const user = shallowRef<User | null>(null)
  /** True once it is known whether a session was left from before. */
  const settled = shallowRef(false)
  let restoring: Promise<void> | undefined

  const sites = computed<readonly SiteMembership[]>(() => user.value?.sites ?? [])
  const signedIn = computed(() => user.value !== null)

  client.onSignedOut(() => forget())

  /** Takes up the session that the refresh cookie stands for, if there is one. Never throws for "there is none". */
  function restore(): Promise<void> {
    restoring ??= client
      .refresh()
      .then((session) => {
        if (session !== null) take(session)
      })
      .catch((error: unknown) => {
        const none = error instanceof ApiProblem && error.kind !== 'offline' && error.kind !== 'server'
        if (!none) {
          // The server is away: a later visit tries again.
          restoring = undefined
          throw error
        }
      })
      .finally(() => {
        settled.value = true
      })
    return restoring
  }

  /** Signs in; throws `ApiProblem` with the server's words when it refuses. */
  async function signIn(credentials: SignIn): Promise<void> {
    take(await call(sessionEndpoints.signIn, { body: credentials }))
    settled.value = true
  }

  /** Signs out on this device, also when the server cannot be told. */
  async function signOut(): Promise<void> {
    try {
      await call(sessionEndpoints.signOut)
    } finally {
      forget()
    }
  }

  function may(action: Action, siteSlug: string): boolean {
    const membership = sites.value.find((site) => site.slug === siteSlug)
    return membership !== undefined && matrixAllows(membership.roles, action)
  }

  function take(session: Session): void {
    client.setToken(session.token)
    user.value = session.user
    preferences.follow(session.user.preferences)
  }

  function forget(): void {
    client.setToken(null)
    user.value = null
    preferences.follow(null)
  }

  return { user, settled, sites, signedIn, restore, signIn, signOut, may }
})
