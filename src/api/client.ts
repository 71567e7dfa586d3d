import { createClient } from './create-client.ts'

/** The page's one client: the access token it holds is lost with the page, and the refresh cookie brings it back. */
export const client = createClient({ fetch: (url, init) => fetch(url, init) })

/** `call(endpoint, { params, query, body, ifMatch })`: see `Client.call`. */
export const call = client.call
