import type { CookieOptions, Request, Response } from 'express'
import { refreshTokenLifeMs } from './refresh-token.ts'

const name = 'coalhand_refresh'

/** The cookie that carries a refresh token: out of reach of scripts, and sent to `/api/session` only. */
export interface RefreshCookie {
  read(request: Request): string | undefined
  set(response: Response, token: string): void
  clear(response: Response): void
}

/** @param secure whether people reach this server over HTTPS */
export function createRefreshCookie(secure: boolean): RefreshCookie {
  const options = { httpOnly: true, sameSite: 'strict', path: '/api/session', secure } satisfies CookieOptions
  return {
    read: (request) => cookieValue(request.get('Cookie') ?? '', name),
    set: (response, token) => response.cookie(name, token, { ...options, maxAge: refreshTokenLifeMs }),
    clear: (response) => response.clearCookie(name, options),
  }
}

/** One value of a Cookie header (RFC 6265 section 4.2.1). */
function cookieValue(header: string, wanted: string): string | undefined {
  for (const pair of header.split(';')) {
    const [key, value] = pair.trim().split('=', 2)
    if (key === wanted && value) return value
  }
  return undefined
}
