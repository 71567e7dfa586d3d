/**
 * Where a page's address says one was on the way to: a path of ours, else the front page. Never an address with a
 * host (`//…`, or with a backslash, which browsers read as a slash): that would lead elsewhere.
 */
export function ownPath(to: unknown): string {
  return typeof to === 'string' && /^\/(?![/\\])/.test(to) ? to : '/'
}
