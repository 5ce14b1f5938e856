import { CaptureError } from '../decode/types'
import type { ByteSource } from './types'
import { checkRange } from './range'

const ATTEMPTS = 4

const wait = (ms: number, signal?: AbortSignal) => new Promise<void>((resolve, reject) => {
  const timer = setTimeout(resolve, ms)
  signal?.addEventListener('abort', () => {
    clearTimeout(timer)
    reject(signal.reason)
  }, { once: true })
})

/**
 * An archived file, read by HTTP ranges (RFC 9110, section 14). A dropped connection or an answer of the 5xx
 * class is tried again, three times with growing pauses; a server that ignores the range is refused, because
 * reading on would load the whole file.
 */
export function httpSource(url: string, name: string, size: number, fetcher: typeof fetch = fetch): ByteSource {
  async function once(offset: number, length: number, signal?: AbortSignal): Promise<Uint8Array<ArrayBuffer>> {
    const answer = await fetcher(url, { headers: { Range: `bytes=${offset}-${offset + length - 1}` }, signal })
    if (answer.status >= 500) throw new TypeError(`The archive answered ${answer.status}.`)
    if (answer.status === 404 || answer.status === 401 || answer.status === 403) throw new CaptureError('unreadable', `${name} is no longer available to you in the archive.`)
    const whole = answer.status === 200 && offset === 0 && length === size
    // A server may leave the size open, "/*" (RFC 9110, section 14.4).
    const range = `bytes ${offset}-${offset + length - 1}`
    const given = answer.headers.get('content-range')
    if (!whole && (answer.status !== 206 || (given !== `${range}/${size}` && given !== `${range}/*`))) {
      await answer.body?.cancel()
      throw new CaptureError('unreadable', `${name} cannot be read in parts from the archive (it answered ${answer.status}). Download it and open the file instead.`)
    }
    const bytes = new Uint8Array(await answer.arrayBuffer())
    if (bytes.byteLength !== length) throw new TypeError('The connection ended early.')
    return bytes
  }
  return {
    name,
    size,
    async read(offset, length, signal) {
      signal?.throwIfAborted()
      checkRange(name, size, offset, length)
      if (length === 0) return new Uint8Array(0)
      for (let attempt = 1; ; attempt++) {
        try {
          return await once(offset, length, signal)
        }
        catch (error) {
          if (signal?.aborted || !(error instanceof TypeError)) throw error
          if (attempt === ATTEMPTS) throw Object.assign(new CaptureError('unreadable', `${name} cannot be read from the archive: the connection fails. Try again when it is back; what was computed is kept.`), { cause: error })
          await wait(250 * 2 ** attempt, signal)
        }
      }
    },
  }
}
