/** Builds the client into dist/client when its sources have changed; returns a closing word. */
export function buildClientWhenStale(root: string, say: (text: string) => void): Promise<string>

/** Whether the built client is missing or was made from other sources. */
export function clientIsStale(root: string): boolean
