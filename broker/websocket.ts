import type { IncomingMessage } from 'node:http'
import { Duplex } from 'node:stream'
import { WebSocketServer, type WebSocket } from 'ws'
import { mqttSubprotocol } from '#shared/contract/mqtt.ts'
import { FrameTooLarge } from './gate.ts'

/** MQTT over WebSocket (MQTT 3.1.1, section 6), for devices behind networks that let nothing else through. */
export interface MqttSockets {
  /** Answers an upgrade request and passes the stream of its bytes on. */
  upgrade: (request: IncomingMessage, socket: Duplex, head: Buffer) => void
}

export interface MqttSocketsOptions {
  onStream: (stream: Duplex, request: IncomingMessage) => void
  /** A frame above it is refused at its header, in bytes. Packets need not be aligned with frames. */
  maxFrameBytes?: number
}

const usualMaxFrameBytes = 1024 * 1024
/** What may wait unread by a client before its pings are no longer answered, in bytes. */
const maxUnreadPongs = 16 * 1024
/** How long a client is given to answer that the connection is closed, in ms. */
const farewellMs = 1_000
/** Close codes of RFC 6455, section 7.4.1. */
const closeCodes = { normal: 1000, unsupportedData: 1003 } as const

export function createMqttSockets({
  onStream,
  maxFrameBytes = usualMaxFrameBytes,
}: MqttSocketsOptions): MqttSockets {
  const sockets = new WebSocketServer({
    noServer: true,
    clientTracking: false,
    perMessageDeflate: false,
    autoPong: false,
    maxPayload: maxFrameBytes,
    // [MQTT-6.0.0-4]
    handleProtocols: (offered) => (offered.has(mqttSubprotocol) ? mqttSubprotocol : false),
  })
  return {
    upgrade: (request, socket, head) => {
      if (!offersMqtt(request)) {
        turnAway(socket)
        return
      }
      sockets.handleUpgrade(request, socket, head, (webSocket) =>
        onStream(streamOf(webSocket, maxFrameBytes), request),
      )
    },
  }
}

/** [MQTT-6.0.0-3]: a client that does not offer the subprotocol does not mean this. */
function offersMqtt({ headers }: IncomingMessage): boolean {
  const offered = headers['sec-websocket-protocol']?.split(',') ?? []
  return offered.some((name) => name.trim() === mqttSubprotocol)
}

function turnAway(socket: Duplex): void {
  const told = `Offer the subprotocol ${mqttSubprotocol}.\n`
  socket.on('error', () => undefined)
  socket.end(
    `HTTP/1.1 400 Bad Request\r\nConnection: close\r\nContent-Type: text/plain\r\nContent-Length: ${told.length}\r\n\r\n${told}`,
  )
}

/**
 * The bytes in a WebSocket's binary frames as one stream; not read, it does not read its socket. A text frame closes
 * the connection [MQTT-6.0.0-1].
 */
function streamOf(webSocket: WebSocket, maxFrameBytes: number): Duplex {
  const stream = new Duplex({
    read: () => {
      if (webSocket.isPaused) webSocket.resume()
    },
    write: (chunk: Buffer, _encoding, done) => {
      // A socket that is gone shows in its closing.
      webSocket.send(chunk, () => done())
    },
    final: (done) => {
      webSocket.once('close', () => done())
      webSocket.close(closeCodes.normal)
    },
    destroy: (error, done) => {
      if (webSocket.readyState === webSocket.CLOSING) {
        const hurry = setTimeout(() => webSocket.terminate(), farewellMs)
        webSocket.once('close', () => clearTimeout(hurry))
      } else webSocket.terminate()
      done(error)
    },
  })
  webSocket.on('message', (data, isBinary) => {
    if (!isBinary) {
      webSocket.close(closeCodes.unsupportedData, 'Binary frames only.')
      stream.destroy()
    } else if (Buffer.isBuffer(data) && data.length > 0 && !stream.push(data)) webSocket.pause()
  })
  webSocket.on('ping', (data) => {
    if (webSocket.bufferedAmount < maxUnreadPongs) webSocket.pong(data)
  })
  webSocket.on('error', (error) => {
    const isTooLarge = 'code' in error && error.code === 'WS_ERR_UNSUPPORTED_MESSAGE_LENGTH'
    const fault = { kind: 'frame-too-large' as const, maxBytes: maxFrameBytes }
    stream.destroy(isTooLarge ? new FrameTooLarge(fault) : error)
  })
  webSocket.on('close', () => {
    if (stream.destroyed) return
    stream.push(null)
    // Nothing that is still to be written can go anywhere.
    stream.destroy()
  })
  return stream
}
