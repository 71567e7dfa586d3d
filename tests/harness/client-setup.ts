import { fileURLToPath } from 'node:url'
import { buildClientWhenStale } from '../../server/setup/client-build.mjs'

/** The browser tests look at the client as it is now, also when they are run by themselves. */
export default async function setup(): Promise<void> {
  await buildClientWhenStale(fileURLToPath(new URL('../../', import.meta.url)), () => undefined)
}
