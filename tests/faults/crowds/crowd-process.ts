import { connect, type Socket } from 'node:net'
import { once } from 'node:events'
import { generate } from 'mqtt-packet'
import { WebSocket } from 'ws'
import { systemClock } from '#shared/domain/clock.ts'
import { CrowdPlan, type CrowdCounts, type CrowdMember } from './crowd-plan.ts'

const counts: CrowdCounts = { ready: false, connected: 0, lost: 0, sent: 0 }

process.once('message', (message) => {
  void gather(CrowdPlan.parse(message)).then(() => {
    counts.ready = true
    tell()
    setInterval(tell, 500)
  })
})
process.on('disconnect', () => process.exit(0))

function tell(): void {
  process.send?.(counts)
}

async function gather(plan: CrowdPlan): Promise<void> {
  switch (plan.kind) {
    case 'flood':
      for (const [index, member] of plan.members.entries()) await startFlood(plan.port, member, index)
      return
    case 'idle':
      return standIdle(plan)
    case 'deaf-devices':
      for (const member of plan.members) {
        for (let listener = 0; listener < plan.listeners; listener++)
          await listen(plan.port, member, listener)
        void publishLarge(await signIn(plan.port, member, 'speaker'), member).catch(turnedOut)
      }
      return
    case 'deaf-pages':
      await Promise.all(plan.tickets.map((ticket, index) => stare(plan, ticket, index < plan.asking)))
  }
}

/** Its socket's end was counted. */
function turnedOut(): void {
  // Nothing is left to do for it.
}

/** Connects and waits for the CONNACK. */
async function signIn(port: number, member: CrowdMember, clientId: string, keepalive = 0): Promise<Socket> {
  const socket = open(port)
  socket.write(
    generate({
      cmd: 'connect',
      protocolId: 'MQTT',
      protocolVersion: 4,
      clean: true,
      clientId,
      keepalive,
      username: member.username,
      password: Buffer.from(member.secret),
    }),
  )
  await answer(socket)
  counts.connected++
  socket.on('close', () => {
    counts.connected--
    counts.lost++
  })
  return socket
}

async function answer(socket: Socket): Promise<void> {
  await Promise.race([
    once(socket, 'data'),
    once(socket, 'close').then(() => {
      throw new Error('The server closed a connection of the crowd.')
    }),
  ])
}

function open(port: number): Socket {
  const socket = connect({ port, host: '127.0.0.1', noDelay: true })
  socket.on('error', () => undefined)
  return socket
}

/** One floods with readings, one with readings after it had listened to itself for a moment, one with its status. */
async function startFlood(port: number, member: CrowdMember, index: number): Promise<void> {
  const socket = await signIn(port, member, 'flood')
  if (index % 3 === 1) {
    socket.write(
      generate({ cmd: 'subscribe', messageId: 1, subscriptions: [{ topic: member.topic, qos: 0 }] }),
    )
    await answer(socket)
    socket.write(generate({ cmd: 'unsubscribe', messageId: 2, unsubscriptions: [member.topic] }))
    await answer(socket)
  }
  const startMs = systemClock.now() - 20_000
  void flood(socket, (number) =>
    index % 3 === 2
      ? { topic: member.statusTopic, payload: 'online' }
      : { topic: member.topic, payload: newReading(startMs, number) },
  ).catch(turnedOut)
}

/** A millisecond a reading and channel: all are new, and with four channels they stay behind the present. */
function newReading(startMs: number, number: number): string {
  const atMs = startMs + Math.floor(number / 4)
  return `[{"n":"${1 + (number % 4)}","u":"Cel","v":${60 + (number % 640) / 16},"t":${atMs / 1000}}]`
}

/** Messages without end, none of which is acknowledged; each write waits until the last was taken. */
async function flood(
  socket: Socket,
  message: (number: number) => { topic: string; payload: string },
): Promise<void> {
  socket.resume()
  const packets = 100
  for (let number = 0; !socket.destroyed; number += packets) {
    const batch = Array.from({ length: packets }, (_, index) =>
      generate({ cmd: 'publish', ...message(number + index), qos: 0, dup: false, retain: false }),
    )
    counts.sent += packets
    if (!socket.write(Buffer.concat(batch)))
      await Promise.race([once(socket, 'drain'), once(socket, 'close')])
    else await new Promise((resolve) => setImmediate(resolve))
  }
}

async function standIdle({
  port,
  members,
  connections,
}: Extract<CrowdPlan, { kind: 'idle' }>): Promise<void> {
  for (let from = 0; from < connections; from += 50) {
    const some = Array.from({ length: Math.min(50, connections - from) }, (_, index) => from + index)
    await Promise.all(
      some.map(async (number) => {
        const member = members[number % members.length]
        if (!member) return
        // One in ten never says a word, and is back as soon as it is turned out.
        if (number % 10 === 0) standMute(port)
        else {
          const socket = await signIn(port, member, `idle-${number}`, 60)
          socket.resume()
          // And one in ten is in the middle of a packet, a byte at a time.
          if (number % 10 === 1) dribble(socket, member)
          else ping(socket)
        }
      }),
    )
  }
}

function standMute(port: number): void {
  const socket = open(port)
  socket.on('connect', () => counts.connected++)
  socket.on('close', () => {
    counts.connected--
    setTimeout(() => standMute(port), 100)
  })
  socket.resume()
}

function dribble(socket: Socket, { topic }: CrowdMember): void {
  const payload = Buffer.alloc(60_000, ' ')
  const packet = generate({ cmd: 'publish', topic, payload, qos: 1, messageId: 1, dup: false, retain: false })
  let at = 0
  const timer = setInterval(() => socket.write(packet.subarray(at, ++at)), 500)
  socket.on('close', () => clearInterval(timer))
}

function ping(socket: Socket): void {
  const timer = setInterval(() => socket.write(Buffer.from([0xc0, 0])), 20_000)
  socket.on('close', () => clearInterval(timer))
}

/** Subscribes, leaves everything in the socket, and when turned out does so again. */
async function listen(port: number, member: CrowdMember, number: number): Promise<void> {
  const socket = await signIn(port, member, `listener-${number}`)
  const subscriptions = [
    { topic: member.topic, qos: 1 as const },
    { topic: member.statusTopic, qos: 1 as const },
  ]
  socket.write(generate({ cmd: 'subscribe', messageId: 1, subscriptions }))
  await answer(socket)
  socket.pause()
  // Who neither reads nor writes does not notice that it was turned out.
  const timer = setInterval(() => socket.write(Buffer.from([0xc0, 0])), 1_000)
  socket.on('close', () => {
    clearInterval(timer)
    setTimeout(() => void listen(port, member, number).catch(turnedOut), 500)
  })
}

/** A reading twenty-five times a second, in a packet of 60 kB: what matters is what the listeners are sent. */
async function publishLarge(socket: Socket, { topic }: CrowdMember): Promise<void> {
  socket.resume()
  for (let messageId = 1; !socket.destroyed; messageId++) {
    const payload = `[{"n":"1","u":"Cel","v":60,"t":${systemClock.now() / 1000}}]`.padEnd(60_000, ' ')
    socket.write(generate({ cmd: 'publish', topic, payload, qos: 1, messageId, dup: false, retain: false }))
    counts.sent++
    await new Promise((resolve) => setTimeout(resolve, 40))
  }
}

/** Enters the room and stops reading. */
async function stare(
  { url, path, site }: Extract<CrowdPlan, { kind: 'deaf-pages' }>,
  ticket: string,
  asks: boolean,
): Promise<void> {
  const socket = new WebSocket(url.replace('http', 'ws') + path)
  socket.on('error', () => undefined)
  await once(socket, 'open')
  counts.connected++
  const timer = setInterval(() => {
    if (socket.readyState !== WebSocket.OPEN) return
    // Who neither reads nor writes does not notice that it was turned out.
    if (!asks) {
      socket.pong()
      return
    }
    counts.sent++
    socket.send(JSON.stringify({ type: 'snapshot', site }))
  }, 200)
  socket.on('close', () => {
    clearInterval(timer)
    counts.connected--
    counts.lost++
  })
  socket.send(JSON.stringify({ type: 'hello', ticket }))
  socket.send(JSON.stringify({ type: 'subscribe', site }))
  await once(socket, 'message')
  socket.pause()
}
