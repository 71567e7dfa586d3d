import { spawn } from 'node:child_process'
import { once } from 'node:events'
import { connectAsync, type IClientOptions, type MqttClient } from 'mqtt'
import type { HouseDevice } from '../harness/house.ts'

/** Connects as a device does, over TCP; no second try unless asked for. */
export function connectDevice(
  port: number,
  device: Pick<HouseDevice, 'username' | 'secret'>,
  options: IClientOptions = {},
): Promise<MqttClient> {
  return connectAsync(`mqtt://127.0.0.1:${port}`, {
    username: device.username,
    password: device.secret,
    reconnectPeriod: 0,
    connectTimeout: 5_000,
    ...options,
  })
}

/** The topic of a device's readings. */
export function topicOf(device: { slug: string }, site = 'quarry-road'): string {
  return `coalhand/${site}/${device.slug}/readings`
}

/** A reading as SenML. */
export function record(channel: number, celsius: number, atMs?: number) {
  return { n: String(channel), u: 'Cel', v: celsius, ...(atMs !== undefined && { t: atMs / 1000 }) }
}

/** Publishes with QoS 1 and waits for the acknowledgement. */
export async function publish(
  client: MqttClient,
  topic: string,
  pack: unknown,
  qos: 0 | 1 | 2 = 1,
): Promise<void> {
  await client.publishAsync(topic, typeof pack === 'string' ? pack : JSON.stringify(pack), { qos })
}

/** Resolves when a client's connection is closed, whatever for. */
export function closing(client: MqttClient): Promise<void> {
  return new Promise((resolve) => {
    client.on('error', () => undefined)
    client.once('close', () => resolve())
  })
}

/** Publishes with Debian's own client. @returns its exit code and what it said */
export async function mosquittoPub(
  port: number,
  device: Pick<HouseDevice, 'username' | 'secret'>,
  topic: string,
  message: string,
): Promise<{ code: number | null; said: string }> {
  const child = spawn('mosquitto_pub', [
    ...['-h', '127.0.0.1', '-p', String(port), '-u', device.username, '-P', device.secret],
    ...['-V', '311', '-q', '1', '-t', topic, '-m', message],
  ])
  let said = ''
  child.stderr.on('data', (chunk: Buffer) => (said += chunk.toString()))
  child.stdout.on('data', (chunk: Buffer) => (said += chunk.toString()))
  await once(child, 'close')
  return { code: child.exitCode, said }
}

/** Waits until something is so. Fails loudly: with what was seen last. */
export async function eventually<T>(
  look: () => Promise<T> | T,
  isSo: (seen: T) => boolean,
  withinMs = 5_000,
): Promise<T> {
  const deadline = performance.now() + withinMs
  for (;;) {
    const seen = await look()
    if (isSo(seen)) return seen
    if (performance.now() > deadline)
      throw new Error(`Not so within ${withinMs} ms; last seen: ${JSON.stringify(seen)}`)
    await new Promise((resolve) => setTimeout(resolve, 10))
  }
}
