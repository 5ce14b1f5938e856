/**
 * Filing a run: hash, announce, upload with resumption, file. Every step can be taken again: announcing the same run
 * finds the one announced before, an upload goes on at the byte where it stopped, filing twice is once.
 */
import type { AnnounceBody, RunDetail } from '~~/shared/api/archive'
import type { FileRole } from '~~/shared/schemas/run'
import { sha256OfBlob } from './uploads/hash'
import { nextRate, startRate } from './uploads/rate'
import { Transfer } from './uploads/transfer'

export interface FilingFile { role: FileRole, name: string, data: Blob }
export type FilingStep = 'idle' | 'hashing' | 'announcing' | 'uploading' | 'paused' | 'waiting' | 'filing' | 'filed' | 'failed'

async function isWell(): Promise<boolean> {
  try {
    return (await fetch('/api/health', { cache: 'no-store' })).ok
  }
  catch {
    return false
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
  let transfer: Transfer | null = null
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
      await upload(answer.id, open.map(item => ({ id: item.id, name: item.name, uploadUrl: item.uploadUrl, data: files[announced.findIndex(local => local.role === item.role && local.sha256 === item.sha256)]!.data })), signal)
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
      transfer = null
    }
  }

  async function upload(runId: string, files: ConstructorParameters<typeof Transfer>[0], signal: AbortSignal): Promise<void> {
    if (files.length === 0) return
    step.value = 'uploading'
    let rate = startRate(performance.now())
    transfer = new Transfer(files, {
      endpoint: '/files', isWell,
      known: async () => (await api<RunDetail>(`/api/runs/${runId}`)).files,
      onWaiting: (waiting) => { if (step.value === 'uploading' || step.value === 'waiting') step.value = waiting ? 'waiting' : 'uploading' },
      onBytes: (bytes) => {
        rate = nextRate(rate, performance.now(), bytes)
        bytesPerSecond.value = rate.bytesPerSecond
        sent.value = bytes
      },
    })
    await transfer.run(signal)
  }

  function pause() {
    if (step.value !== 'uploading' || !transfer) return
    transfer.pause()
    step.value = 'paused'
  }
  function resume() {
    if (step.value !== 'paused' || !transfer) return
    step.value = 'uploading'
    transfer.resume()
  }
  /** Stops; what has arrived is kept on the server, and filing again goes on there. */
  function stop() {
    controller?.abort(new DOMException('The filing was stopped.', 'AbortError'))
  }
  /** A page that is left keeps what has arrived; nothing runs on without it. */
  onScopeDispose(() => controller?.abort(new DOMException('The page was left.', 'AbortError')))

  return { step, problem, run, sent, total, bytesPerSecond, secondsLeft, active, file, pause, resume, stop }
}
