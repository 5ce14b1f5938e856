import { CaptureError } from '../decode/types'
import type { ByteSource } from './types'
import { checkRange } from './range'

/** A file picked or dropped by the user; only the slices that are asked for are read. */
export function blobSource(blob: Blob, name: string): ByteSource {
  return {
    name,
    size: blob.size,
    async read(offset, length, signal) {
      signal?.throwIfAborted()
      checkRange(name, blob.size, offset, length)
      let buffer: ArrayBuffer
      try {
        buffer = await blob.slice(offset, offset + length).arrayBuffer()
      }
      catch (cause) {
        // Browsers report a card pulled out, a file deleted or one changed on disk alike (NotReadableError).
        throw Object.assign(new CaptureError('unreadable', `${name} can no longer be read. It may have been moved, changed or be on a card that was taken out. Put it back and open it again; what was computed is kept.`), { cause })
      }
      signal?.throwIfAborted()
      return new Uint8Array(buffer)
    },
  }
}
