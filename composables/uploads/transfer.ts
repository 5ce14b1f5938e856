/**
 * Brings announced files to the server, one after the other, whatever happens to the connection or the server on the
 * way. Where an upload has begun, the server knows (`uploadUrl` of the announced file): nothing is remembered in the
 * browser, so another browser goes on as well, and nothing is left after a sign-out.
 */
import Uppy from '@uppy/core'
import Tus from '@uppy/tus'
import type { RunFile } from '../../shared/api/archive'

export interface TransferFile { id: string, name: string, data: Blob, uploadUrl: string | null }
type Known = Pick<RunFile, 'id' | 'state' | 'problem' | 'uploadUrl'>

export interface TransferOptions {
  endpoint: string
  headers?: Record<string, string>
  /** Whether the server is well: while it is not, nothing is asked of it. */
  isWell(): Promise<boolean>
  /** What the server knows of the files now. */
  known(): Promise<Known[]>
  onBytes(sent: number): void
  /** Whether the transfer waits for a server that is away or unwell. */
  onWaiting(waiting: boolean): void
  chunkBytes?: number
  retryDelays?: number[]
}

const CHUNK_BYTES = 8 * 2 ** 20
const RETRY_DELAYS = [0, 500, 1000, 2000, 4000, 8000, 15_000]
/** Rounds without a single new byte after which the user is asked. */
const ROUNDS = 20
/** Refusals that may pass by themselves: timed out, another connection writes, too many. */
const passing = (status: number) => status < 400 || status >= 500 || [408, 409, 423, 429].includes(status)

interface TusRequest { getMethod(): string }
interface TusResponse { getStatus(): number, getHeader(name: string): string | undefined }

export class Transfer {
  readonly #uppy: Uppy
  readonly #options: TransferOptions
  readonly #files: Map<string, TransferFile>

  constructor(files: TransferFile[], options: TransferOptions) {
    this.#options = options
    this.#uppy = new Uppy({ autoProceed: false, allowMultipleUploadBatches: true, logger: { debug() {}, warn() {}, error() {} } })
    this.#uppy.use(Tus, {
      endpoint: options.endpoint, headers: options.headers, chunkSize: options.chunkBytes ?? CHUNK_BYTES, limit: 1, retryDelays: options.retryDelays ?? RETRY_DELAYS,
      storeFingerprintForResuming: false, allowedMetaFields: ['fileId'], onBeforeRequest: this.#before, onAfterResponse: after,
    } as never)
    // The id of the announced file makes each entry its own, so that no file is taken for one of the same name and size.
    this.#files = new Map(files.map(file => [this.#uppy.addFile({ name: file.name, type: 'application/octet-stream', data: file.data, meta: { fileId: file.id, relativePath: file.id } }), file]))
    for (const [key, file] of this.#files) this.#goOnAt(key, file.uploadUrl)
    this.#uppy.on('progress', () => options.onBytes(this.#sent()))
    this.#uppy.on('upload-error', (file, error) => {
      if (file) this.#statuses.set(file.id, (error as { originalResponse?: TusResponse }).originalResponse?.getStatus() ?? 0)
    })
  }

  /** Resolves when the server has every file; rejects with words for the user, or with the signal's reason. What has arrived stays there. */
  async run(signal: AbortSignal): Promise<void> {
    signal.throwIfAborted()
    let stop = () => {}
    const stopped = new Promise<never>((_, reject) => {
      stop = () => reject(signal.reason)
      signal.addEventListener('abort', stop, { once: true })
    })
    this.#signal = signal
    try {
      await Promise.race([this.#rounds(), stopped])
    }
    finally {
      signal.removeEventListener('abort', stop)
      this.#letGo()
    }
  }

  pause(): void {
    this.#uppy.pauseAll()
  }

  resume(): void {
    this.#uppy.resumeAll()
  }

  #signal: AbortSignal | null = null

  async #rounds(): Promise<void> {
    let result = await this.#uppy.upload()
    let best = this.#sent()
    for (let barren = 0; (result?.failed?.length ?? 0) > 0;) {
      const failed = result!.failed!
      const left = await this.#compare(failed.map(file => file.id))
      if (left === 0) return
      barren = this.#sent() > best ? 0 : barren + 1
      best = Math.max(best, this.#sent())
      const refused = failed.find(file => this.#uppy.getFile(file.id) && !passing(this.#statuses.get(file.id) ?? 0))
      if (refused || barren >= ROUNDS) throw new Error(`${(refused ?? failed[0])!.name} could not be uploaded. What has arrived is kept: file the run again to go on.`)
      result = await this.#uppy.retryAll()
    }
  }

  /** Looks up what the server has of files whose upload broke off. Returns how many of them are still to be brought. */
  async #compare(keys: string[]): Promise<number> {
    const known = new Map((await this.#askKnown()).map(file => [file.id, file]))
    let left = 0
    for (const key of keys) {
      const file = known.get(this.#files.get(key)!.id)
      if (file?.state === 'refused') throw new Error(file.problem ?? 'The file was refused.')
      if (file?.state === 'received') {
        this.#arrived += this.#files.get(key)!.data.size
        this.#uppy.removeFile(key)
        continue
      }
      this.#goOnAt(key, file?.uploadUrl ?? null)
      left++
    }
    return left
  }

  async #askKnown(): Promise<Known[]> {
    for (;;) {
      await this.#untilWell()
      try {
        return await this.#options.known()
      }
      catch (error) {
        if (!passing((error as { status?: number }).status ?? 0)) throw error
        await new Promise(resolve => setTimeout(resolve, 1000))
      }
    }
  }

  /** HTTP status of the last error of an entry; 0 where there was no answer. */
  readonly #statuses = new Map<string, number>()

  /** Bytes of files that arrived although the last answer was lost. */
  #arrived = 0
  #sent(): number {
    return this.#arrived + this.#uppy.getFiles().reduce((sum, file) => sum + (Number(file.progress.bytesUploaded) || 0), 0)
  }

  #goOnAt(key: string, uploadUrl: string | null): void {
    this.#uppy.setFileState(key, { tus: { uploadUrl } } as never)
  }

  // Asking how far an upload is waits for a server that is well.
  #before = async (request: TusRequest) => {
    if (request.getMethod() === 'HEAD') await this.#untilWell()
  }

  async #untilWell(): Promise<void> {
    for (let wait = 250; ; wait = Math.min(10_000, wait * 2)) {
      this.#signal?.throwIfAborted()
      if (await this.#options.isWell()) break
      this.#options.onWaiting(true)
      await new Promise(resolve => setTimeout(resolve, wait))
    }
    this.#options.onWaiting(false)
  }

  /** Ends without a word to the server: `destroy()` alone would make the plugin delete what has arrived. */
  #letGo(): void {
    const tus = this.#uppy.getPlugin('Tus') as unknown as { resetUploaderReferences(key: string): void } | undefined
    for (const key of this.#files.keys()) tus?.resetUploaderReferences(key)
    this.#uppy.destroy()
  }
}

/**
 * The client takes every answer to HEAD but a good one for "this upload is gone" and begins a new one at byte 0. Only
 * the tus server itself may say so; a proxy or a server in trouble is an error, after which the client asks again.
 */
function after(request: TusRequest, response: TusResponse): void {
  const status = response.getStatus()
  if (request.getMethod() === 'HEAD' && (status >= 500 || !response.getHeader('Tus-Resumable'))) throw new Error(`The server did not say how far the upload is (${status}).`)
}
