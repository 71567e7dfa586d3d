import type { ConnectPacket } from 'aedes'
import type { Logger } from 'pino'
import { assignDevice, isOwnTopic, type Connection } from './connection.ts'
import type { Refusal, SignedInDevice } from './device.ts'

export interface SignInDeps {
  signIn: (username: string, secret: string) => Promise<SignedInDevice | undefined>
  onRefused: (refusal: Refusal) => void
  log: Logger
}

/** Return codes of CONNACK (MQTT 3.1.1, table 3.1). */
const connackCode = { unavailable: 3, badCredentials: 4, notAuthorized: 5 } as const

/** A CONNECT is answered with this return code. */
export class SignInError extends Error {
  constructor(
    readonly returnCode: (typeof connackCode)[keyof typeof connackCode],
    message: string,
  ) {
    super(message)
  }
}

/** Takes from a CONNECT what the broker does not leave to its library. */
export function readConnect(connection: Connection, packet: ConnectPacket): void {
  connection.keepAliveMs = (packet.keepalive ?? 0) * 1000
  connection.willTopic = packet.will?.topic
  // The gate counts silence, because only it knows when nothing could be heard.
  packet.keepalive = 0
  // A client id is a device's own affair: without the user name in it, one device could push out another.
  if (packet.clientId !== '' && packet.username !== undefined) {
    packet.clientId = `${packet.username}/${packet.clientId}`
  }
}

/**
 * Finds the device that a connection speaks for.
 * @returns the refusal when it speaks for none, or may not leave such a last will; else null
 */
export async function signInConnection(
  connection: Connection,
  credentials: { username: string | undefined; password: Buffer | undefined },
  deps: SignInDeps,
): Promise<SignInError | null> {
  const device = await findDevice(credentials, deps)
  if (device instanceof SignInError) return device
  assignDevice(connection, device)
  const { willTopic } = connection
  if (willTopic === undefined || isOwnTopic(connection, willTopic)) return null
  deps.onRefused({
    device,
    topic: willTopic,
    reason: 'foreign-topic',
    detail: `its last will is for ${willTopic}, which is not its own topic`,
    payload: Buffer.alloc(0),
  })
  return new SignInError(connackCode.notAuthorized, 'the last will is for a foreign topic')
}

async function findDevice(
  { username, password }: { username: string | undefined; password: Buffer | undefined },
  { signIn, log }: SignInDeps,
): Promise<SignedInDevice | SignInError> {
  if (username === undefined || password === undefined) {
    return new SignInError(connackCode.badCredentials, 'user name or secret missing')
  }
  let device: SignedInDevice | undefined
  try {
    device = await signIn(username, password.toString())
  } catch (error) {
    log.warn({ err: error }, 'A device could not be signed in')
    return new SignInError(connackCode.unavailable, 'sign-in is not possible just now')
  }
  if (device) return device
  log.info({ username }, 'A device gave a wrong user name or secret')
  return new SignInError(connackCode.badCredentials, 'wrong user name or secret')
}
