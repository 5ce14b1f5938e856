/**
 * The one bridge to the imaging core. It owns the worker, keeps a strong reference to it and to its proxy
 * (a collected proxy drops calls without a word), notices when the worker no longer answers, ends it on
 * close, and starts a new one for the next call. Nothing else in the application touches comlink.
 */
import { proxy, releaseProxy, wrap, type Remote } from 'comlink'
import type { CaptureInput, CoreApi, DriftAnswer, ExportFile, ExportKind, FiledRun, FrameColumns, GuestApi, OpenAnswer, Optics, Part, RunEvent, StackImage, WorkerApi } from '../workers/api'
import type { CaptureOverrides } from '../shared/schemas/capture'
import type { Recipe } from '../shared/schemas/recipe'
import type { Evidence } from '../shared/schemas/evidence'
import type { RestorePlan } from '../shared/schemas/restoration'
import type { MeasureRequest, MeasureResult } from '../shared/schemas/measure'
import type { StackFigures } from '../shared/schemas/run'

/** The worker stopped or was ended because it no longer answered. What the browser's store holds is safe; open the capture again. */
export class CoreStopped extends Error {
  override name = 'CoreStopped'
}

/** While a call is open the worker is asked this often whether it is alive, and ended after that long without an answer, ms. */
const ASK_EVERY = 2000
const GIVE_UP_AFTER = 30_000

interface Alive { alive(): Promise<boolean> }

/** A worker with its proxy; ended once, for good. */
class Bridge<Api extends Alive> {
  readonly api: Remote<Api>
  readonly #worker: Worker
  readonly #fail: ((reason: Error) => void)[] = []
  #stopped: Error | null = null
  #open = 0
  #timer: ReturnType<typeof setInterval> | null = null
  #askedAt: number | null = null

  constructor(worker: Worker) {
    this.#worker = worker
    this.api = wrap<Api>(worker)
    worker.onerror = event => this.stop(new CoreStopped(`The imaging core stopped${event.message ? `: ${event.message}` : ''}. Nothing that was saved is lost; open the capture again.`))
  }

  get stopped(): boolean { return this.#stopped !== null }

  /** Awaits a call, or the end of the worker, or the signal; the signal cancels the call, or else ends the worker. */
  async call<T>(work: Promise<T>): Promise<T> {
    if (this.#stopped) throw this.#stopped
    this.#watch()
    this.#open += 1
    let fail: (reason: Error) => void = () => undefined
    const stopped = new Promise<never>((_resolve, reject) => { fail = reject })
    this.#fail.push(fail)
    try {
      return await Promise.race([work, stopped])
    }
    finally {
      this.#fail.splice(this.#fail.indexOf(fail), 1)
      this.#open -= 1
      if (this.#open === 0) this.#unwatch()
    }
  }

  stop(reason: Error): void {
    if (this.#stopped) return
    this.#stopped = reason
    this.#unwatch()
    this.#worker.terminate()
    for (const fail of this.#fail.slice()) fail(reason)
  }

  /** One question at a time; only an unanswered one counts, because timers of a hidden page fire late. */
  #watch(): void {
    this.#timer ??= setInterval(() => {
      if (this.#askedAt === null) {
        this.#askedAt = performance.now()
        void (this.api as unknown as Alive).alive().then(() => { this.#askedAt = null })
      }
      else if (performance.now() - this.#askedAt > GIVE_UP_AFTER) {
        this.stop(new CoreStopped('The capture could not be read: its decoder did not answer and was ended. Open another capture, or check this file.'))
      }
    }, ASK_EVERY)
  }

  #unwatch(): void {
    if (this.#timer) clearInterval(this.#timer)
    this.#timer = null
    this.#askedAt = null
  }
}

export interface CoreHandle extends CoreApi {
  /** Ends the worker; the next call starts a new one. */
  end(): void
}

/** The core for captures. Call `end` (or `close`) when the screen goes. */
export function useCore(): CoreHandle {
  let bridge: Bridge<WorkerApi> | null = null
  const live = () => {
    if (!bridge || bridge.stopped) bridge = new Bridge<WorkerApi>(new Worker(new URL('../workers/bench.worker.ts', import.meta.url), { type: 'module' }))
    return bridge
  }
  const end = () => {
    bridge?.stop(new CoreStopped('The capture was closed.'))
    bridge = null
  }
  return {
    async open(input: CaptureInput, overrides: CaptureOverrides): Promise<OpenAnswer> {
      const { api, call } = bound(live())
      return await call(api.open(plain(input), plain(overrides)) as Promise<OpenAnswer>)
    },
    async run(recipe: Recipe, optics: Optics | null, onEvent: (event: RunEvent) => void) {
      const { api, call } = bound(live())
      return await call(api.run(plain(recipe), plain(optics), proxy((event: RunEvent) => {
        if (event.kind === 'timing') leaveMark(event)
        onEvent(event)
      })) as Promise<{ cancelled: boolean }>)
    },
    async cancel() {
      if (bridge && !bridge.stopped) await bridge.call(bridge.api.cancel() as Promise<void>)
    },
    async stack(count: number, restored: boolean, dragging = false, part: Part | null = null) {
      const { api, call } = bound(live())
      return await call(api.stack(count, restored, dragging, plain(part)) as Promise<StackImage>)
    },
    async figures(count: number) {
      const { api, call } = bound(live())
      return await call(api.figures(count) as Promise<StackFigures>)
    },
    async restorePlan(count: number) {
      const { api, call } = bound(live())
      return await call(api.restorePlan(count) as Promise<RestorePlan>)
    },
    async starTransfer(count: number) {
      const { api, call } = bound(live())
      return await call(api.starTransfer(count) as Promise<{ step: number, values: number[] } | null>)
    },
    async evidence() {
      const { api, call } = bound(live())
      return await call(api.evidence() as Promise<Evidence>)
    },
    async frame(index: number) {
      const { api, call } = bound(live())
      return await call(api.frame(index) as Promise<StackImage>)
    },
    async export(kinds: ExportKind[], context) {
      const { api, call } = bound(live())
      return await call(api.export(kinds, plain(context)) as Promise<ExportFile[]>)
    },
    async measure(request: MeasureRequest) {
      const { api, call } = bound(live())
      return await call(api.measure(plain(request)) as Promise<MeasureResult>)
    },
    async drift(declinationDeg: number, onProgress: (done: number, total: number) => void) {
      const { api, call } = bound(live())
      return await call(api.drift(declinationDeg, proxy(onProgress)) as Promise<DriftAnswer>)
    },
    async close() {
      if (bridge && !bridge.stopped) await Promise.race([bridge.api.close(), new Promise(resolve => setTimeout(resolve, 500))]).catch(() => undefined)
      bridge?.api[releaseProxy]()
      end()
    },
    end,
  }
}

export interface GuestHandle extends Omit<GuestApi, 'alive'> { end(): void }

/** The core for a filed run without its capture. */
export function useGuestCore(): GuestHandle {
  let bridge: Bridge<GuestApi> | null = null
  const live = () => {
    if (!bridge || bridge.stopped) bridge = new Bridge<GuestApi>(new Worker(new URL('../workers/guest.worker.ts', import.meta.url), { type: 'module' }))
    return bridge
  }
  const end = () => {
    bridge?.stop(new CoreStopped('The run was closed.'))
    bridge = null
  }
  return {
    async open(run: FiledRun) {
      const { api, call } = bound(live())
      return await call(api.open(plain(run)) as Promise<{ counts: number[], columns: FrameColumns }>)
    },
    async stack(count: number, restored: boolean) {
      const { api, call } = bound(live())
      return await call(api.stack(count, restored) as Promise<StackImage>)
    },
    async figures(count: number) {
      const { api, call } = bound(live())
      return await call(api.figures(count) as Promise<StackFigures>)
    },
    async average() {
      const { api, call } = bound(live())
      return await call(api.average() as Promise<StackImage | null>)
    },
    async close() { end() },
    end,
  }
}

function bound<Api extends Alive>(bridge: Bridge<Api>): { api: Remote<Api>, call: <T>(work: Promise<T>) => Promise<T> } {
  return { api: bridge.api, call: work => bridge.call(work) }
}

/** A pass of the worker on the page's own performance timeline. */
function leaveMark({ pass, startedAt, ms }: Extract<RunEvent, { kind: 'timing' }>): void {
  const start = Math.max(0, startedAt - performance.timeOrigin)
  performance.measure(`lull.${pass}`, { start, duration: ms })
}

/** Reactive proxies cannot cross to a worker; files can, as they are. */
function plain<T>(value: T): T {
  if (typeof value !== 'object' || value === null || value instanceof Blob) return value
  if (Array.isArray(value)) return value.map(item => plain(item as unknown)) as T
  if (ArrayBuffer.isView(value)) return value
  return Object.fromEntries(Object.entries(value).map(([key, item]) => [key, plain(item as unknown)])) as T
}
