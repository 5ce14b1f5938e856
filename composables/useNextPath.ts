/** The page one came from, if it is one of ours: a path, never an address of another site. */
export function safeNextPath(next: unknown, fallback = '/'): string {
  if (typeof next !== 'string' || !next.startsWith('/')) return fallback
  try {
    const base = 'https://lull.invalid'
    const url = new URL(next, base)
    return url.origin === base ? `${url.pathname}${url.search}${url.hash}` : fallback
  }
  catch {
    return fallback
  }
}
