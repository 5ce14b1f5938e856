/** Compressed strips and tiles of TIFF files. Every decoder stops at the bytes that the page needs, whatever the data say. */
import { inflateCapped } from '../inflate'

/** Compressions that are read: none, LZW, Deflate (two numbers), PackBits. */
export const readableCompressions = new Set([1, 5, 8, 32946, 32773])

const CLEAR = 256
const END = 257
const FIRST_FREE = 258
const MAX_CODES = 4096

/**
 * LZW as TIFF 6.0, section 13, has it: codes of 9 to 12 bits, highest bit first, one bit more from one code earlier than
 * the table needs it. Returns at most `cap` bytes; null where a code cannot be.
 *
 * A string is kept as the place in the output where it was last written, so that the table needs no copies.
 */
export function unpackLzw(bytes: Uint8Array, cap: number): Uint8Array<ArrayBuffer> | null {
  const out = new Uint8Array(cap)
  const starts = new Int32Array(MAX_CODES)
  const lengths = new Int32Array(MAX_CODES)
  let size = 0
  let next = FIRST_FREE
  let width = 9
  let previousStart = -1
  let previousLength = 0
  let held = 0
  let heldBits = 0
  let at = 0
  while (size < cap) {
    while (heldBits < width) {
      // Some writers leave out the code that ends a strip.
      if (at >= bytes.length) return out.subarray(0, size)
      held = ((held << 8) | bytes[at++]!) & 0xffffff
      heldBits += 8
    }
    const code = (held >> (heldBits - width)) & ((1 << width) - 1)
    heldBits -= width
    if (code === END) break
    if (code === CLEAR) {
      next = FIRST_FREE
      width = 9
      previousStart = -1
      continue
    }
    const start = size
    let length: number
    if (code < CLEAR) {
      out[size] = code
      length = 1
    }
    else {
      if (code >= next && !(code === next && previousStart >= 0)) return null
      const from = code < next ? starts[code]! : previousStart
      length = code < next ? lengths[code]! : previousLength + 1
      const room = Math.min(length, cap - size)
      // The string may overlap what is being written: the code that is defined by its own use.
      for (let i = 0; i < room; i++) out[size + i] = out[from + i]!
    }
    if (previousStart >= 0 && next < MAX_CODES) {
      starts[next] = previousStart
      lengths[next] = previousLength + 1
      next++
      if (next === (1 << width) - 1 && width < 12) width++
    }
    size += length
    previousStart = start
    previousLength = length
  }
  return out.subarray(0, Math.min(size, cap))
}

/** PackBits (TIFF 6.0, section 9): runs and literals. Returns at most `cap` bytes. */
export function unpackPackBits(bytes: Uint8Array, cap: number): Uint8Array<ArrayBuffer> {
  const out = new Uint8Array(cap)
  let size = 0
  for (let at = 0; at < bytes.length && size < cap;) {
    const n = bytes[at++]!
    if (n === 128) continue
    const count = Math.min(n < 128 ? n + 1 : 257 - n, cap - size)
    if (n < 128) {
      const part = bytes.subarray(at, at + count)
      out.set(part, size)
      size += part.length
      at += n + 1
    }
    else {
      if (at >= bytes.length) break
      out.fill(bytes[at++]!, size, size + count)
      size += count
    }
  }
  return out.subarray(0, size)
}

/**
 * The most bytes that so many packed ones can give: Deflate makes at most 1032 of one (zlib's technical notes), a code of
 * LZW at least 9 bits long at most a string of 3839 bytes, PackBits at most 128 of two.
 */
export function mostBytesOf(compression: number, packedBytes: number): number {
  if (compression === 1) return packedBytes
  return compression === 32773 ? 64 * packedBytes : compression === 5 ? 3839 * packedBytes : 1032 * packedBytes
}

/** The first `wanted` bytes of a strip or tile; null where the data do not give them. */
export async function unpackBlock(compression: number, bytes: Uint8Array<ArrayBuffer>, wanted: number): Promise<Uint8Array<ArrayBuffer> | null> {
  if (mostBytesOf(compression, bytes.byteLength) < wanted) return null
  const out = compression === 1 ? bytes : compression === 5 ? unpackLzw(bytes, wanted) : compression === 32773 ? unpackPackBits(bytes, wanted) : await inflateCapped(bytes, wanted)
  return out && out.byteLength >= wanted ? out : null
}
