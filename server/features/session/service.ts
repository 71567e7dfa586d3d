import { randomUUID } from 'node:crypto'
import type { Knex } from 'knex'
import type { Session, SignIn, User } from '#shared/contract/session.ts'
import type { Clock } from '#shared/domain/clock.ts'
import { unauthorized } from '../../http/problem.ts'
import type { Person } from '../../http/mount.ts'
import { recordAudit } from '../audit/service.ts'
import { accessTokenLifeS, createAccessTokens } from './access-token.ts'
import { createPasswords } from './password.ts'
import { newRefreshToken, refreshTokenHash, refreshTokenLifeMs, sharedUseMs } from './refresh-token.ts'
import { sessionRepository, type PreferencesChange } from './repository.ts'

export interface SessionDeps {
  db: Knex
  /** Real time, whatever the clock of a site says. */
  clock: Clock
  /** Signs access tokens. */
  tokenKey: string
  /** bcrypt's cost; 10 unless said otherwise. */
  passwordCost?: number | undefined
}

/** A session that has begun or goes on, and the refresh token for its cookie. */
export interface Signed {
  session: Session
  refreshToken: string
}

export type SessionService = ReturnType<typeof createSessionService>

/**
 * Sign-in and what follows. An access token is short and says only who; a refresh token is used once and replaced by
 * the next of its family. A used one that comes again is a copy in other hands, and ends the family, except within a
 * few seconds of its use, when it is another tab of the same browser (RFC 9700 section 4.14.2).
 */
export function createSessionService({ db, clock, tokenKey, passwordCost }: SessionDeps) {
  const accessTokens = createAccessTokens(tokenKey, clock)
  const passwords = createPasswords(passwordCost)
  const sessions = sessionRepository(db)

  const signedIn = (user: User, refreshToken: string): Signed => ({
    session: { token: accessTokens.issue(user.id), expiresInS: accessTokenLifeS, user },
    refreshToken,
  })

  const addToken = async (repository: typeof sessions, userId: number, familyId: string): Promise<string> => {
    const token = newRefreshToken()
    const now = clock.now()
    const expiresAt = now + refreshTokenLifeMs
    await repository.addToken({ hash: refreshTokenHash(token), familyId, userId, createdAt: now, expiresAt })
    return token
  }

  return {
    /** @throws HttpProblem 401, the same for an unknown address and for a wrong password */
    async signIn({ email, password }: SignIn): Promise<Signed> {
      const known = await sessions.credentialsOf(email)
      const matches = await passwords.matches(password, known?.passwordHash)
      const user = known && matches ? await sessions.user(known.id) : undefined
      if (!user) throw unauthorized('That e-mail address and password do not go together.')
      await sessions.dropExpired(clock.now())
      return signedIn(user, await addToken(sessions, user.id, randomUUID()))
    },

    /** @throws HttpProblem 401 when the token is unknown, too old or no longer good */
    async refresh(token: string): Promise<Signed> {
      const next = await db.transaction((trx) => useToken(trx, token))
      const user = next && (await sessions.user(next.userId))
      if (!user) throw unauthorized('Your session has ended. Sign in again.')
      return signedIn(user, next.token)
    },

    /** Ends the session on this device: no token of its family is good any more. */
    async signOut(token: string | undefined): Promise<void> {
      if (token === undefined) return
      await db.transaction(async (trx) => {
        const repository = sessionRepository(trx)
        const stored = await repository.lockToken(refreshTokenHash(token))
        if (stored) await repository.revokeFamily(stored.familyId, clock.now())
      })
    },

    async setPreferences(userId: number, preferences: PreferencesChange): Promise<User> {
      await sessions.setPreferences(userId, preferences)
      const user = await sessions.user(userId)
      if (!user) throw unauthorized()
      return user
    },

    /** The person of an access token with the roles of this moment; undefined when it is not good. */
    personOf: async (accessToken: string): Promise<Person | undefined> => {
      const userId = accessTokens.verify(accessToken)
      return userId === undefined ? undefined : person(userId)
    },

    person,
    hashPassword: (password: string) => passwords.hash(password),
    /** For what acts in a person's name without their password, such as tests. */
    issueAccessToken: (userId: number) => accessTokens.issue(userId),
  }

  /** A person with the roles of this moment; undefined when they may no longer sign in. */
  async function person(userId: number): Promise<Person | undefined> {
    const found = await sessions.person(userId)
    return found && { userId, ...found }
  }

  /** Takes a token out of use and gives the next; undefined when there is none to give. Never throws a refusal: what
   *  it revokes has to be committed. */
  async function useToken(trx: Knex.Transaction, token: string) {
    const repository = sessionRepository(trx)
    const hash = refreshTokenHash(token)
    const stored = await repository.lockToken(hash)
    const now = clock.now()
    if (!stored || stored.revokedAt || stored.disabledAt || stored.expiresAt.getTime() <= now)
      return undefined
    const { familyId, userId, usedAt } = stored
    if (usedAt && now - usedAt.getTime() > sharedUseMs) {
      await repository.revokeFamily(familyId, now)
      await recordAudit(trx, { at: now, userId, action: 'session.reused', subject: `family ${familyId}` })
      return undefined
    }
    if (!usedAt) await repository.markUsed(hash, now)
    return { userId, token: await addToken(repository, userId, familyId) }
  }
}
