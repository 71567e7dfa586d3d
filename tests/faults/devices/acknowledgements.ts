/** Type of a packet, the upper half of its first byte (MQTT 3.1.1, table 2.1). */
const types = { connack: 2, puback: 4, pingresp: 13 } as const

export interface AcknowledgementListeners {
  onConnack: (returnCode: number) => void
  onPuback: (packetId: number) => void
  onPong: () => void
}

/**
 * Reads what a server sends to a client that has not subscribed: packets of two and of four bytes, cut anywhere. Quick
 * enough for one process to be a thousand boxes.
 */
export function acknowledgements(listeners: AcknowledgementListeners): (chunk: Buffer) => void {
  let rest: Buffer = Buffer.alloc(0)
  return (chunk) => {
    const bytes = rest.length === 0 ? chunk : Buffer.concat([rest, chunk])
    let at = 0
    while (bytes.length - at >= 2) {
      const length = bytes.readUInt8(at + 1)
      if (length > 2) throw new Error('A server sent what nobody had subscribed to.')
      if (bytes.length - at < 2 + length) break
      const type = bytes.readUInt8(at) >> 4
      if (type === types.connack) listeners.onConnack(bytes.readUInt8(at + 3))
      else if (type === types.puback) listeners.onPuback(bytes.readUInt16BE(at + 2))
      else if (type === types.pingresp) listeners.onPong()
      at += 2 + length
    }
    rest = bytes.subarray(at)
  }
}
