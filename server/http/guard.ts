import type { Request } from 'express'
import type { SiteSource } from '#shared/contract/endpoint.ts'
import type { DeviceIdentity, Guard, Person, SiteContext } from './mount.ts'

export interface GuardDeps {
  personOf: (accessToken: string) => Promise<Person | undefined>
  signInDevice: (
    username: string,
    secret: string,
    origin: { transport: 'http'; remoteAddress: string },
  ) => Promise<DeviceIdentity | undefined>
  siteOf: (source: SiteSource, value: string) => Promise<SiteContext | undefined>
}

/** Reads who asks from the `Authorization` header: Bearer (RFC 6750) for people, Basic (RFC 7617) for devices. */
export function createGuard({ personOf, signInDevice, siteOf }: GuardDeps): Guard {
  return {
    person: async (request) => {
      const token = credentials(request, 'Bearer')
      return token === undefined ? undefined : personOf(token)
    },
    device: async (request) => {
      const encoded = credentials(request, 'Basic')
      if (encoded === undefined) return undefined
      const [, username, secret] =
        /^([^:]*):(.*)$/s.exec(Buffer.from(encoded, 'base64').toString('utf8')) ?? []
      if (!username || !secret) return undefined
      return signInDevice(username, secret, { transport: 'http', remoteAddress: request.ip ?? '' })
    },
    siteOf,
  }
}

function credentials(request: Request, scheme: 'Bearer' | 'Basic'): string | undefined {
  const [, given, value] =
    /^([A-Za-z]+) +([A-Za-z0-9\-._~+/]+=*)$/.exec(request.get('Authorization') ?? '') ?? []
  return given?.toLowerCase() === scheme.toLowerCase() ? value : undefined
}
