/** A source of the present. Everything that needs "now" is given one of these. */
export interface Clock {
  /** The present, in milliseconds since 1970-01-01 UTC. */
  now(): number
}

/** A clock that stands where it is put: for tests and replays. */
export interface SettableClock extends Clock {
  set(ms: number): void
  advance(ms: number): void
}

/** Makes a clock that moves only when told to. */
export function settableClock(startMs: number): SettableClock {
  let present = startMs
  return {
    now: () => present,
    set: (ms) => {
      present = ms
    },
    advance: (ms) => {
      present += ms
    },
  }
}

/** The one place where the machine's clock is read. */
export const systemClock: Clock = {
  now: () => Date.now(),
}
