import { ServerMessage, type ClientMessage } from '../shared/contract/live.ts'
import type { Random } from '../shared/domain/random.ts'
import { backoffMs } from './live-backoff.ts'

/** As much of a WebSocket as is needed here; tests bring their own. */
export interface Socket {
  send(text: string): void
  close(): void
  onopen: (() => void) | null
  onmessage: ((event: { data: unknown }) => void) | null
  onclose: (() => void) | null
}

export interface ConnectionDeps {
  openSocket(): Socket
  /** Gets a ticket for one socket; throws when the server cannot be reached or nobody is signed in. */
  ticket(): Promise<string>
  /** Whether an error of `ticket` means that trying again is of no use. */
  isFinal(error: unknown): boolean
  random: Random
  /** Runs `task` after `ms`; gives back what cancels it. */
  later(task: () => void, ms: number): () => void
  onMessage(message: ServerMessage): void
  /** The line is up and the server has said welcome. */
  onUp(): void
  /** The line is down and will be opened again, unless `final`. */
  onDown(final: boolean): void
}

export interface LiveConnection {
  /** Opens the line unless it is open or being opened; while waiting for the next attempt it tries at once. */
  open(): void
  /** Sends when the line is up; says whether it did. */
  send(message: ClientMessage): boolean
  /** Closes the line for good (until `open`). */
  close(): void
}

/** Without a word for this long, the server is asked whether it is still there. */
const silenceMs = 45_000
/** And this long it may take to answer. */
const answerMs = 10_000

/** A WebSocket that comes back: ticket, hello, welcome; then messages until it is lost, then again after a while. */
export function createLiveConnection(
  deps: ConnectionDeps,
  probe: () => ClientMessage | null,
): LiveConnection {
  let wanted = false
  let up = false
  let attempt = 0
  let socket: Socket | null = null
  /** Counts attempts, so that a late answer of an older one is not taken for the present one's. */
  let turn = 0
  let connecting = false
  let cancelTimer: () => void = () => undefined

  function setTimer(task: () => void, ms: number): void {
    cancelTimer()
    cancelTimer = deps.later(task, ms)
  }

  async function connect(): Promise<void> {
    const mine = ++turn
    connecting = true
    cancelTimer()
    try {
      const ticket = await deps.ticket()
      if (mine !== turn) return
      listen(deps.openSocket(), ticket, mine)
    } catch (error) {
      if (mine !== turn) return
      if (deps.isFinal(error)) close(true)
      else lost(mine)
    }
  }

  function listen(opened: Socket, ticket: string, mine: number): void {
    socket = opened
    opened.onopen = () => {
      opened.send(JSON.stringify({ type: 'hello', ticket } satisfies ClientMessage))
    }
    opened.onclose = () => lost(mine)
    opened.onmessage = ({ data }) => {
      if (mine !== turn) return
      const message = parseMessage(data)
      if (message === null) return
      setTimer(askWhetherAlive, silenceMs)
      if (message.type === 'welcome') {
        up = true
        connecting = false
        attempt = 0
        deps.onUp()
      }
      deps.onMessage(message)
    }
    // A server that accepts the line and then says nothing is as good as none.
    setTimer(() => drop(mine), answerMs)
  }

  function askWhetherAlive(): void {
    const question = probe()
    const mine = turn
    if (question === null) {
      setTimer(askWhetherAlive, silenceMs)
      return
    }
    send(question)
    setTimer(() => drop(mine), answerMs)
  }

  function drop(mine: number): void {
    const old = socket
    lost(mine)
    old?.close()
  }

  function lost(mine: number): void {
    if (mine !== turn) return
    turn += 1
    const wait = backoffMs(attempt, deps.random)
    attempt += 1
    up = false
    connecting = false
    socket = null
    cancelTimer()
    if (!wanted) return
    deps.onDown(false)
    setTimer(() => void connect(), wait)
  }

  function send(message: ClientMessage): boolean {
    if (!up || socket === null) return false
    socket.send(JSON.stringify(message))
    return true
  }

  function close(final: boolean): void {
    wanted = false
    turn += 1
    up = false
    connecting = false
    attempt = 0
    cancelTimer()
    const old = socket
    socket = null
    old?.close()
    if (final) deps.onDown(true)
  }

  return {
    open: () => {
      wanted = true
      if (!up && !connecting) void connect()
    },
    send,
    close: () => close(false),
  }
}

/** A message that does not fit the contract is from a newer server: what can be read is read, the rest left. */
function parseMessage(data: unknown): ServerMessage | null {
  if (typeof data !== 'string') return null
  try {
    const parsed = ServerMessage.safeParse(JSON.parse(data))
    return parsed.success ? parsed.data : null
  } catch {
    return null
  }
}
