/** Acknowledgements of one connection, in the order in which its messages came, gathered into few writes. */
export interface Acknowledgements {
  /** A message has come. @returns call it when the message is stored */
  expect: (messageId: number) => () => void
  /** Messages that are not acknowledged yet. */
  waiting: () => number
}

/**
 * Sends PUBACK packets [MQTT-4.6.0-2]: in the order of the PUBLISH packets, whichever is stored first. Those that
 * become due in one turn of the event loop go out in one write.
 */
export function createAcknowledgements(write: (packets: Buffer) => void): Acknowledgements {
  /** Those from `first` on wait; negative ones are stored and wait for those before them. */
  let ids: number[] = []
  let first = 0
  /** The number, over all, of the message at the head of `ids`. */
  let headNumber = 0
  let flushing = false

  function settle(number: number): void {
    const at = number - headNumber
    ids[at] = -(ids[at] ?? 0)
    if (at !== first || flushing) return
    flushing = true
    setImmediate(flush)
  }

  function flush(): void {
    flushing = false
    let end = first
    while (end < ids.length && (ids[end] ?? 0) < 0) end++
    const packets = Buffer.allocUnsafe((end - first) * 4)
    for (let at = 0; first < end; first++, at += 4) {
      packets.writeUInt16BE(0x4002, at)
      packets.writeUInt16BE(-(ids[first] ?? 0), at + 2)
    }
    if (first === ids.length || first > 1000) {
      headNumber += first
      ids = ids.slice(first)
      first = 0
    }
    if (packets.length > 0) write(packets)
  }

  return {
    expect: (messageId) => {
      const number = headNumber + ids.push(messageId) - 1
      return () => settle(number)
    },
    waiting: () => ids.length - first,
  }
}
