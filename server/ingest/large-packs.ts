/** A large pack that has come and is not looked into yet. */
export interface LargePack {
  bytes: number
  /** Decodes it and puts it in line. */
  open: () => void
  giveUp: (error: Error) => void
}

/** Large packs in the order in which they came. */
export interface LargePacks {
  add: (pack: LargePack) => void
  /** Opens the next ones, as long as more is wanted. */
  openWhile: (wanted: () => boolean) => void
  bytes: () => number
  /** Gives up all of them. */
  giveUpAll: (error: Error) => void
}

/**
 * What devices kept through an outage comes all at once, and decoding it all at once would hold up live readings for
 * seconds: it waits as it came, and is decoded as the database gets on.
 * @param onPressure more than `maxBytes` wait, or less than half of it again
 */
export function createLargePacks(maxBytes: number, onPressure: (on: boolean) => void): LargePacks {
  let packs: LargePack[] = []
  let first = 0
  let bytes = 0
  let pressed = false

  function updatePressure(): void {
    if (pressed ? bytes < maxBytes / 2 : bytes > maxBytes) {
      pressed = !pressed
      onPressure(pressed)
    }
  }

  return {
    add: (pack) => {
      packs.push(pack)
      bytes += pack.bytes
      updatePressure()
    },
    openWhile: (wanted) => {
      while (first < packs.length && wanted()) {
        const pack = packs[first++]
        if (!pack) continue
        bytes -= pack.bytes
        pack.open()
      }
      if (first > packs.length / 2) {
        packs = packs.slice(first)
        first = 0
      }
      updatePressure()
    },
    bytes: () => bytes,
    giveUpAll: (error) => {
      const rest = packs.slice(first)
      packs = []
      first = 0
      bytes = 0
      for (const pack of rest) pack.giveUp(error)
      updatePressure()
    },
  }
}
