import type { Duplex } from 'node:stream'

/** Writes to what carries a connection, and is done when it takes more, or never will. */
export function writeThrough(carrier: Duplex, chunk: Buffer, done: () => void): void {
  if (carrier.destroyed || carrier.writableEnded || carrier.write(chunk)) {
    done()
    return
  }
  const settle = () => {
    carrier.off('drain', settle)
    carrier.off('close', settle)
    done()
  }
  carrier.on('drain', settle)
  carrier.on('close', settle)
}

/** Ends a connection once what was written has gone out, but waits for nobody. */
export function hangUp(carrier: Duplex): void {
  if (carrier.destroyed) return
  const deadline = setTimeout(() => carrier.destroy(), 1000)
  carrier.once('close', () => clearTimeout(deadline))
  carrier.end(() => carrier.destroy())
}
