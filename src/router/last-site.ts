const key = 'coalhand.last-site'

/** The site that was open last on this device. */
export function lastSite(): string | null {
  return localStorage.getItem(key)
}

/** Keeps the open site for the next visit. */
export function rememberSite(slug: string): void {
  localStorage.setItem(key, slug)
}
