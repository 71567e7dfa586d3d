import type { ConnectPacket } from 'aedes'
import type { Logger } from 'pino'
import { assignDevice, isOwnTopic, type Connection } from './connection.ts'
import type { Origin, Refusal, SignedInDevice } from './device.ts'
import type { BrokerLimits } from './limits.ts'

export interface SignInDeps {
  signIn: (username: string, secret: string, origin: Origin) => Promise<SignedInDevice | undefined>
  limits: Pick<BrokerLimits, 'maxClientIdBytes' | 'maxKeptBytes'>
  onRefused: (refusal: Refusal) => void
  log: Logger
}

/** Return codes of CONNACK (MQTT 3.1.1, table 3.1). */
const connackCode = { badClientId: 2, unavailable: 3, badCredentials: 4, notAuthorized: 5 } as const

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
  connection.will = packet.will && { topic: packet.will.topic, bytes: packet.will.payload.length }
  connection.clientId = packet.clientId
  // The gate counts silence, because only it knows when nothing could be heard.
  packet.keepalive = 0
  // A client id is a device's own affair: without the user name in it, one device could push out another.
  if (packet.clientId !== '' && packet.username !== undefined) {
    packet.clientId = `${packet.username}/${packet.clientId}`
  }
  connection.sessionId = packet.clientId
  connection.isNameless = packet.clientId === '' && !packet.clean
}

/** What makes a CONNECT malformed that the library lets pass [MQTT-3.1.4-1]; it is closed without an answer. */
export function faultOfConnect(packet: ConnectPacket): Error | null {
  if (isIllFormed(packet.clientId)) return new Error('the client id is not well-formed text')
  if ((packet.will?.qos ?? 0) > 2) return new Error('a last will of QoS 3')
  return null
}

/** [MQTT-1.5.3-1], [MQTT-1.5.3-2]: the library reads what is not UTF-8 as U+FFFD. */
export function isIllFormed(text: string): boolean {
  return text.includes('\uFFFD') || text.includes('\0')
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
  if (Buffer.byteLength(connection.clientId) > deps.limits.maxClientIdBytes) {
    return new SignInError(connackCode.badClientId, 'the client id is too long')
  }
  // [MQTT-3.1.3-8]: nobody could come back to such a session.
  if (connection.isNameless) {
    return new SignInError(connackCode.badClientId, 'a kept session without a client id')
  }
  const device = await findDevice(credentials, connection.origin, deps)
  if (device instanceof SignInError) return device
  assignDevice(connection, device)
  const refused = wrongOfWill(connection, deps.limits.maxKeptBytes)
  if (!refused) return null
  deps.onRefused({ device, topic: connection.will?.topic ?? '', payload: Buffer.alloc(0), ...refused })
  return new SignInError(connackCode.notAuthorized, refused.detail)
}

function wrongOfWill(
  connection: Connection,
  maxBytes: number,
): Pick<Refusal, 'reason' | 'detail'> | undefined {
  const { will } = connection
  if (!will) return undefined
  if (!isOwnTopic(connection, will.topic)) {
    const detail = `its last will is for ${will.topic}, which is not its own topic`
    return { reason: 'foreign-topic', detail }
  }
  if (will.bytes <= maxBytes) return undefined
  return {
    reason: 'too-large',
    detail: `its last will has ${will.bytes} bytes; at most ${maxBytes} are kept`,
  }
}

async function findDevice(
  { username, password }: { username: string | undefined; password: Buffer | undefined },
  origin: Origin,
  { signIn, log }: SignInDeps,
): Promise<SignedInDevice | SignInError> {
  if (username === undefined || password === undefined) {
    return new SignInError(connackCode.badCredentials, 'user name or secret missing')
  }
  let device: SignedInDevice | undefined
  try {
    device = await signIn(username, password.toString(), origin)
  } catch (error) {
    log.warn({ err: error }, 'A device could not be signed in')
    return new SignInError(connackCode.unavailable, 'sign-in is not possible just now')
  }
  if (device) return device
  log.info({ username }, 'A device gave a wrong user name or secret')
  return new SignInError(connackCode.badCredentials, 'wrong user name or secret')
}
