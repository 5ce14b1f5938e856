import { createSHA256 } from 'hash-wasm'

/** Small enough that the page never stands still for it, large enough that reading is not slowed down. */
const SLICE_BYTES = 2 * 2 ** 20

/** SHA-256 of a blob of any size in hex, slice by slice. `onBytes` gets the bytes done so far. */
export async function sha256OfBlob(blob: Blob, onBytes: (done: number) => void, signal: AbortSignal): Promise<string> {
  const hash = await createSHA256()
  for (let at = 0; at < blob.size; at += SLICE_BYTES) {
    signal.throwIfAborted()
    hash.update(new Uint8Array(await blob.slice(at, at + SLICE_BYTES).arrayBuffer()))
    onBytes(Math.min(blob.size, at + SLICE_BYTES))
  }
  return hash.digest('hex')
}
