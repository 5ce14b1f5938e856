import type { ByteSource } from './types'
import { checkRange } from './range'

/** Bytes that are already in memory. */
export function memorySource(name: string, bytes: Uint8Array): ByteSource {
  return {
    name,
    size: bytes.byteLength,
    async read(offset, length, signal) {
      signal?.throwIfAborted()
      checkRange(name, bytes.byteLength, offset, length)
      return bytes.slice(offset, offset + length) as Uint8Array<ArrayBuffer>
    },
  }
}
