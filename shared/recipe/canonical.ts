/**
 * The canonical JSON of a recipe and the SHA-256 over it, the same in browser, worker, Node and server.
 *
 * Canonical form: object keys sorted by code unit, no white space, numbers as ECMAScript prints them
 * (as RFC 8785 asks for the subset used here: finite numbers, strings, booleans, null, objects, arrays).
 */
export type JsonValue = string | number | boolean | null | JsonValue[] | { [key: string]: JsonValue }

/** Canonical JSON text. Throws a RangeError for a number that is not finite; undefined fields are left out. */
export function canonicalJson(value: unknown): string {
  if (value === null || typeof value === 'boolean' || typeof value === 'string') return JSON.stringify(value)
  if (typeof value === 'number') {
    if (!Number.isFinite(value)) throw new RangeError('A canonical form has finite numbers only.')
    return JSON.stringify(value)
  }
  if (Array.isArray(value)) return `[${value.map(item => canonicalJson(item)).join(',')}]`
  if (typeof value === 'object') {
    const entries = Object.entries(value as Record<string, unknown>)
      .filter(([, item]) => item !== undefined)
      .sort(([a], [b]) => (a < b ? -1 : a > b ? 1 : 0))
    return `{${entries.map(([key, item]) => `${JSON.stringify(key)}:${canonicalJson(item)}`).join(',')}}`
  }
  throw new TypeError(`A canonical form cannot hold a ${typeof value}.`)
}

/** SHA-256 of a text or of bytes as 64 lower-case hex digits. Needs Web Crypto (a secure context, or Node). */
export async function sha256Hex(data: string | Uint8Array): Promise<string> {
  const bytes = typeof data === 'string' ? new TextEncoder().encode(data) : data
  const digest = await crypto.subtle.digest('SHA-256', bytes as Uint8Array<ArrayBuffer>)
  return [...new Uint8Array(digest)].map(byte => byte.toString(16).padStart(2, '0')).join('')
}

/** Hash that names a recipe: SHA-256 over its canonical JSON. */
export function recipeHash(recipe: unknown): Promise<string> {
  return sha256Hex(canonicalJson(recipe))
}
