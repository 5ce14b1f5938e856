/** zlib streams (RFC 1950), with a cap on what may come out: a small file must not fill the memory. */

/** Inflates at most `cap` bytes. Returns null for a damaged stream; what was inflated until the cap otherwise. */
export async function inflateCapped(bytes: Uint8Array, cap: number): Promise<Uint8Array<ArrayBuffer> | null> {
  const reader = new Blob([bytes as Uint8Array<ArrayBuffer>]).stream().pipeThrough(new DecompressionStream('deflate')).getReader()
  const parts: Uint8Array[] = []
  let size = 0
  try {
    while (size < cap) {
      const { done, value } = await reader.read()
      if (done) break
      parts.push(value)
      size += value.byteLength
    }
  }
  catch {
    // Some writers leave out the final checksum: what came before it is used if it is enough (the caller checks).
    if (size < cap) return size > 0 ? join(parts, size) : null
  }
  finally {
    await reader.cancel().catch(() => undefined)
  }
  return join(parts, Math.min(size, cap))
}

function join(parts: Uint8Array[], size: number): Uint8Array<ArrayBuffer> {
  const out = new Uint8Array(size)
  let at = 0
  for (const part of parts) {
    const room = Math.min(part.byteLength, size - at)
    out.set(room === part.byteLength ? part : part.subarray(0, room), at)
    at += room
    if (at === size) break
  }
  return out
}
