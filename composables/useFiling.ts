/**
 * Filing a run: hash, announce, upload with resumption, file. Every step can be taken again: announcing the same run
 * finds the one announced before, an upload goes on at the byte where it stopped, filing twice is once.
 */
import Uppy from '@uppy/core'
import Tus from '@uppy/tus'
import { createSHA256 } from 'hash-wasm'
import type { AnnounceBody, RunDetail } from '~~/shared/api/archive'
import type { FileRole } from '~~/shared/schemas/run'

export interface FilingFile { role: FileRole, name: string, data: Blob }
export type FilingStep = 'idle' | 'hashing' | 'announcing' | 'uploading' | 'paused' | 'waiting' | 'filing' | 'filed' | 'failed'

const CHUNK_BYTES = 8 * 2 ** 20
const SLICE_BYTES = 4 * 2 ** 20
const RETRY_DELAYS = [0, 500, 1000, 2000, 4000, 8000, 15_000]
/** Times a broken upload is taken up again by itself before the user is asked. */
const TRIES = 20

/** SHA-256 of a blob of any size, slice by slice. */
export async function sha256OfBlob(blob: Blob, onBytes: (done: number) => void, signal: AbortSignal): Promise<string> {
  const hash = await createSHA256()
  for (let at = 0; at < blob.size; at += SLICE_BYTES) {
    signal.throwIfAborted()
    hash.update(new Uint8Array(await blob.slice(at, at + SLICE_BYTES).arrayBuffer()))
    onBytes(Math.min(blob.size, at + SLICE_BYTES))
  }
  return hash.digest('hex')
}

/** Resolves when the server says that it is well; upload state is asked for only then, or a restart would begin at byte 0. */
async function untilWell(signal: AbortSignal, onWait: () => void): Promise<void> {
  for (let wait = 500; ; wait = Math.min(10_000, wait * 2)) {
    try {
      const answer = await fetch('/api/health', { cache: 'no-store', signal })
      if (answer.ok) return
    }
    catch (error) {
      if (signal.aborted) throw error
    }
    onWait()
    await new Promise(resolve => setTimeout(resolve, wait))
    signal.throwIfAborted()
  }
}

export function useFiling() {
  const api = useApi()
  const step = ref<FilingStep>('idle')
  const problem = ref<string | null>(null)
  const run = shallowRef<RunDetail | null>(null)
  const sent = ref(0)
  const total = ref(0)
  const bytesPerSecond = ref(0)
  let uppy: Uppy | null = null
  let controller: AbortController | null = null

  const active = computed(() => !['idle', 'filed', 'failed'].includes(step.value))
  const secondsLeft = computed(() => (bytesPerSecond.value > 0 ? (total.value - sent.value) / bytesPerSecond.value : null))

  /** Files a run; the same call again goes on where it stopped. Returns the filed run, or null when it was stopped. */
  async function file(body: Omit<AnnounceBody, 'files'>, files: FilingFile[]): Promise<RunDetail | null> {
    if (active.value) return null
    controller = new AbortController()
    const { signal } = controller
    const start = performance.now()
    problem.value = null
    sent.value = 0
    total.value = files.reduce((sum, item) => sum + item.data.size, 0)
    try {
      step.value = 'hashing'
      const announced: AnnounceBody['files'] = []
      let hashed = 0
      for (const item of files) {
        const sha256 = await sha256OfBlob(item.data, (done) => { sent.value = hashed + done }, signal)
        hashed += item.data.size
        announced.push({ role: item.role, name: item.name, sizeBytes: item.data.size, sha256 })
      }
      step.value = 'announcing'
      sent.value = 0
      const answer = await api<RunDetail>('/api/runs', { method: 'POST', body: { ...body, files: announced } })
      run.value = answer
      const open = answer.files.filter(item => item.state !== 'received')
      total.value = open.reduce((sum, item) => sum + item.sizeBytes, 0)
      await upload(open.map(item => ({ id: item.id, blob: files[announced.findIndex(local => local.role === item.role && local.sha256 === item.sha256)]!.data, name: item.name })), signal)
      step.value = 'filing'
      run.value = await api<RunDetail>(`/api/runs/${answer.id}/file`, { method: 'POST' })
      step.value = 'filed'
      performance.measure('lull.file', { start, end: performance.now() })
      return run.value
    }
    catch (error) {
      if (signal.aborted) step.value = 'idle'
      else {
        problem.value = asApiFailure(error).status > 0 || error instanceof ApiFailure ? asApiFailure(error).message : error instanceof Error ? error.message : String(error)
        step.value = 'failed'
      }
      return null
    }
    finally {
      uppy?.destroy()
      uppy = null
    }
  }

  async function upload(files: { id: string, blob: Blob, name: string }[], signal: AbortSignal): Promise<void> {
    if (files.length === 0) return
    step.value = 'uploading'
    const rate = { at: performance.now(), bytes: 0 }
    uppy = new Uppy({ autoProceed: false, allowMultipleUploadBatches: true })
    uppy.use(Tus, {
      endpoint: '/files', chunkSize: CHUNK_BYTES, limit: 1, retryDelays: RETRY_DELAYS, removeFingerprintOnSuccess: true, allowedMetaFields: ['fileId'],
      // Asking how far an upload is must wait for a server that is well: an unwell one's answer would start it anew.
      onBeforeRequest: async (request: { getMethod(): string }) => {
        if (request.getMethod() === 'HEAD') await untilWell(signal, () => { step.value = 'waiting' })
        if (step.value === 'waiting') step.value = 'uploading'
      },
    } as never)
    // The id of the announced file makes the fingerprint its own, so that another run's file of the same name and size is never taken for it.
    for (const item of files) uppy.addFile({ name: item.name, type: 'application/octet-stream', data: item.blob, meta: { fileId: item.id, relativePath: item.id } })
    const uploader = uppy
    uppy.on('progress', () => {
      const done = uploader.getFiles().reduce((sum, item) => sum + (Number(item.progress.bytesUploaded) || 0), 0)
      const now = performance.now()
      if (now - rate.at > 500) {
        const current = 1000 * (done - rate.bytes) / (now - rate.at)
        bytesPerSecond.value = bytesPerSecond.value > 0 ? 0.7 * bytesPerSecond.value + 0.3 * Math.max(0, current) : Math.max(0, current)
        rate.at = now
        rate.bytes = done
      }
      sent.value = done
    })
    const stopped = new Promise<never>((_, reject) => signal.addEventListener('abort', () => reject(signal.reason), { once: true }))
    let result = await Promise.race([uppy.upload(), stopped])
    for (let attempt = 1; result && result.failed && result.failed.length > 0; attempt++) {
      const first = result.failed[0]!
      // The server refused for good (the bytes do not match, the run is gone): trying again would not help.
      const status = (first.response as { status?: number } | undefined)?.status ?? 0
      if (attempt > TRIES || (status >= 400 && status < 500 && ![408, 409, 423, 429].includes(status))) throw new Error(`${first.name} could not be uploaded. What has arrived is kept: file the run again to go on.`)
      step.value = 'waiting'
      await Promise.race([untilWell(signal, () => {}), stopped])
      step.value = 'uploading'
      result = await Promise.race([uppy.retryAll(), stopped])
    }
  }

  function pause() {
    if (step.value !== 'uploading' || !uppy) return
    uppy.pauseAll()
    step.value = 'paused'
  }
  function resume() {
    if (step.value !== 'paused' || !uppy) return
    step.value = 'uploading'
    uppy.resumeAll()
  }
  /** Stops; what has arrived is kept on the server, and filing again goes on there. */
  function stop() {
    controller?.abort(new DOMException('The filing was stopped.', 'AbortError'))
    uppy?.cancelAll()
  }
  /** A page that is left keeps what has arrived; nothing runs on without it. */
  onScopeDispose(() => controller?.abort(new DOMException('The page was left.', 'AbortError')))

  return { step, problem, run, sent, total, bytesPerSecond, secondsLeft, active, file, pause, resume, stop }
}
