import type { CaptureInput, CoreApi, DriftAnswer, ExportFile, ExportKind, OpenAnswer, Optics, Part, RunEvent, StackImage } from '../api'
import { CaptureError } from '../decode/types'
import type { CaptureOverrides } from '../../shared/schemas/capture'
import type { Evidence } from '../../shared/schemas/evidence'
import type { MeasureRequest, MeasureResult } from '../../shared/schemas/measure'
import type { Recipe } from '../../shared/schemas/recipe'
import type { RestorePlan } from '../../shared/schemas/restoration'
import type { StackFigures } from '../../shared/schemas/run'
import { calibrateDrift, DriftError } from '../measure/drift/index'
import { Engine } from './engine'
import { measurePair } from './measure'
import { exportFiles, type ExportContext } from './export'
import { openInput } from './open'
import type { Pool } from './pool'
import type { StageStore } from './store'

export interface SessionOptions { makePool: () => Pool, store: StageStore | null, budgetBytes: number }

/** One open capture at a time, as the bench sees the core. Holds state and cancellation and no arithmetic. */
export class Session implements CoreApi {
  readonly #options: SessionOptions
  #engine: Engine | null = null
  #pool: Pool | null = null
  #running: AbortController | null = null
  #stacking: AbortController | null = null
  #measuring: AbortController | null = null
  #finished: Promise<unknown> = Promise.resolve()

  constructor(options: SessionOptions) { this.#options = options }

  async open(input: CaptureInput, overrides: CaptureOverrides): Promise<OpenAnswer> {
    await this.close()
    try {
      const reader = await openInput(input, overrides)
      if (this.#pool?.failed) {
        this.#pool.end()
        this.#pool = null
      }
      this.#pool ??= this.#options.makePool()
      this.#engine = new Engine(reader, { pool: this.#pool, store: this.#options.store, budgetBytes: this.#options.budgetBytes })
      return { ok: true, facts: reader.facts, resumable: await this.#engine.resumable() }
    }
    catch (reason) {
      if (reason instanceof CaptureError) return { ok: false, problem: { code: reason.code, message: reason.message } }
      throw reason
    }
  }

  async run(recipe: Recipe, optics: Optics | null, onEvent: (event: RunEvent) => void): Promise<{ cancelled: boolean }> {
    await this.cancel()
    const engine = this.#need()
    const controller = new AbortController()
    this.#running = controller
    const work = engine.run(recipe, optics, onEvent, controller.signal)
    this.#finished = work.catch(() => undefined)
    try {
      await work
      onEvent({ kind: 'done', provenance: engine.provenance() })
      return { cancelled: false }
    }
    catch (reason) {
      if (controller.signal.aborted) return { cancelled: true }
      throw reason
    }
    finally {
      if (this.#running === controller) this.#running = null
    }
  }

  async cancel(): Promise<void> {
    this.#running?.abort()
    await this.#finished
  }

  async stack(count: number, restored: boolean, dragging = false, part: Part | null = null): Promise<StackImage> {
    // A newer request makes an unfinished older one pointless.
    this.#stacking?.abort()
    this.#stacking = new AbortController()
    return this.#need().stack(count, restored, this.#stacking.signal, dragging, part)
  }

  figures(count: number): Promise<StackFigures> { return this.#need().figures(count) }
  restorePlan(count: number): Promise<RestorePlan> { return this.#need().restorePlan(count) }
  starTransfer(count: number): Promise<{ step: number, values: number[] } | null> { return this.#need().starTransfer(count) }
  evidence(): Promise<Evidence> { return this.#need().evidence() }
  frame(index: number): Promise<StackImage> { return this.#need().frame(index) }
  export(kinds: ExportKind[], context: ExportContext): Promise<ExportFile[]> { return exportFiles(this.#need(), kinds, context) }

  async measure(request: MeasureRequest): Promise<MeasureResult> {
    this.#measuring?.abort()
    const controller = this.#measuring = new AbortController()
    const { state, frames } = this.#need()
    if (!state) throw new Error('Nothing is stacked yet: run the recipe first.')
    return await measurePair(state, request, controller.signal, frames)
  }

  async drift(declinationDeg: number, onProgress: (done: number, total: number) => void): Promise<DriftAnswer> {
    await this.cancel()
    this.#measuring?.abort()
    const controller = this.#measuring = new AbortController()
    try {
      let last = 0
      const drift = await calibrateDrift(this.#need().reader, declinationDeg, {
        signal: controller.signal,
        onProgress: (done, total) => {
          if (performance.now() - last < 100) return
          last = performance.now()
          onProgress(done, total)
        },
      })
      return { ok: true, drift }
    }
    catch (reason) {
      if (reason instanceof DriftError) return { ok: false, message: reason.message }
      throw reason
    }
  }

  async close(): Promise<void> {
    this.#measuring?.abort()
    await this.cancel()
    this.#engine?.close()
    this.#engine = null
  }

  #need(): Engine {
    if (!this.#engine) throw new Error('No capture is open.')
    return this.#engine
  }
}
