import { describe, expect, it } from 'vitest'
import type { ServerMessage } from '@/shared/contract/live.ts'
import { createLiveConnection, type Socket } from './live-connection.ts'

/** A line whose other end, clock and tickets the test holds in its hands. */
function bench() {
  const sockets: (Socket & { sent: string[]; closed: boolean })[] = []
  const timers: { task: () => void; at: number }[] = []
  const told: string[] = []
  const heard: ServerMessage[] = []
  let time = 0
  let ticket: () => Promise<string> = () => Promise.resolve('ticket')

  const connection = createLiveConnection(
    {
      openSocket: () => {
        const sent: string[] = []
        const socket = {
          sent,
          closed: false,
          send: (text: string) => sent.push(text),
          close: () => {
            socket.closed = true
          },
          onopen: null,
          onmessage: null,
          onclose: null,
        }
        sockets.push(socket)
        return socket
      },
      ticket: () => ticket(),
      isFinal: (error) => error instanceof RangeError,
      random: { uniform: () => 1, normal: () => 0 },
      later: (task, ms) => {
        const timer = { task, at: time + ms }
        timers.push(timer)
        return () => {
          const index = timers.indexOf(timer)
          if (index !== -1) timers.splice(index, 1)
        }
      },
      onMessage: (message) => heard.push(message),
      onUp: () => told.push('up'),
      onDown: (final) => told.push(final ? 'down for good' : 'down'),
    },
    () => ({ type: 'snapshot', site: 'quarry-road' }),
  )

  return {
    connection,
    sockets,
    told,
    heard,
    ticketsFail: (error: Error) => {
      ticket = () => Promise.reject(error)
    },
    /** The newest socket; the ticket that it needs is a promise, so it is there only after a turn. */
    newest: async () => {
      await settle()
      const socket = sockets.at(-1)
      if (socket === undefined) throw new Error('no socket was opened')
      return socket
    },
    pass: async (ms: number) => {
      time += ms
      for (const timer of timers.filter(({ at }) => at <= time)) {
        timers.splice(timers.indexOf(timer), 1)
        timer.task()
      }
      await settle()
    },
  }
}

async function settle() {
  for (let i = 0; i < 5; i++) await Promise.resolve()
}

const welcome = { data: JSON.stringify({ type: 'welcome', epoch: 'a' }) }

async function upAndRunning() {
  const line = bench()
  line.connection.open()
  const socket = await line.newest()
  socket.onopen?.()
  socket.onmessage?.(welcome)
  return { line, socket }
}

describe('the live line', () => {
  it('says hello with its ticket and is up once the server says welcome', async () => {
    const { line, socket } = await upAndRunning()
    expect(socket.sent).toEqual(['{"type":"hello","ticket":"ticket"}'])
    expect(line.told).toEqual(['up'])
    expect(line.heard).toEqual([{ type: 'welcome', epoch: 'a' }])
  })

  it('sends nothing before that, and says so', async () => {
    const line = bench()
    line.connection.open()
    await line.newest()
    expect(line.connection.send({ type: 'subscribe', site: 'quarry-road' })).toBe(false)
  })

  it('comes back after a while when it is lost, later each time, and at once after a success', async () => {
    const { line, socket } = await upAndRunning()
    socket.onclose?.()
    expect(line.told).toEqual(['up', 'down'])
    await line.pass(499)
    expect(line.sockets).toHaveLength(1)
    await line.pass(1)
    expect(line.sockets).toHaveLength(2)

    ;(await line.newest()).onclose?.()
    await line.pass(999)
    expect(line.sockets).toHaveLength(2)
    await line.pass(1)
    expect(line.sockets).toHaveLength(3)

    const third = await line.newest()
    third.onmessage?.(welcome)
    third.onclose?.()
    await line.pass(500)
    expect(line.sockets).toHaveLength(4)
  })

  it('tries again when no ticket can be had, but not when nobody is signed in', async () => {
    const line = bench()
    line.ticketsFail(new Error('the server is away'))
    line.connection.open()
    await settle()
    expect(line.told).toEqual(['down'])
    line.ticketsFail(new RangeError('signed out'))
    await line.pass(500)
    expect(line.told).toEqual(['down', 'down for good'])
    await line.pass(3_600_000)
    expect(line.sockets).toHaveLength(0)
  })

  it('asks a server that says nothing for a snapshot, and gives the line up when none comes', async () => {
    const { line, socket } = await upAndRunning()
    await line.pass(45_000)
    expect(socket.sent.at(-1)).toBe('{"type":"snapshot","site":"quarry-road"}')
    await line.pass(10_000)
    expect(socket.closed).toBe(true)
    expect(line.told).toEqual(['up', 'down'])
  })

  it('keeps a line whose server answers', async () => {
    const { line, socket } = await upAndRunning()
    await line.pass(45_000)
    socket.onmessage?.({ data: JSON.stringify({ type: 'refused', reason: 'no such site' }) })
    await line.pass(10_000)
    expect(socket.closed).toBe(false)
    expect(line.told).toEqual(['up'])
  })

  it('tries at once when told to while it waits', async () => {
    const { line, socket } = await upAndRunning()
    socket.onclose?.()
    line.connection.open()
    await settle()
    expect(line.sockets).toHaveLength(2)
    await line.pass(500)
    expect(line.sockets).toHaveLength(2)
  })

  it('stays closed once it was closed', async () => {
    const { line, socket } = await upAndRunning()
    line.connection.close()
    expect(socket.closed).toBe(true)
    socket.onclose?.()
    await line.pass(3_600_000)
    expect(line.sockets).toHaveLength(1)
    expect(line.told).toEqual(['up'])
  })

  it('leaves what it cannot read', async () => {
    const { line, socket } = await upAndRunning()
    for (const data of ['not json', '{"type":"news"}', new Uint8Array(3)]) socket.onmessage?.({ data })
    expect(line.heard).toHaveLength(1)
  })
})
