/**
 * Runs a capture through the passes of a recipe, keeps what each pass found under a content key, and makes
 * stacks of any count. One engine per open capture. Knows neither threads nor storage: both are handed in.
 */
import type { Optics, Part, Pass, RunEvent, StackImage } from '../api'
import type { FrameReader } from '../decode/types'
import { hasSimd } from '../kernels/index'
import { makeRegisterPlan } from '../register/plan'
import { canonicalJson } from '../../shared/recipe/canonical'
import type { Evidence } from '../../shared/schemas/evidence'
import { rankingMeasure, restoringMethod, type Recipe, type ScoreMeasure } from '../../shared/schemas/recipe'
import type { RestorePlan } from '../../shared/schemas/restoration'
import type { Provenance, StackFigures } from '../../shared/schemas/run'
import { engineName, lullVersion } from './version'
import { averageImage } from './average'
import { frameColumns, scoreColumn } from './columns'
import type { PassContext } from './context'
import { evidenceOf } from './evidence/index'
import { Figurer } from './figures'
import { FrameStore, type FrameStoreOptions } from './frames'
import { gradePass, type Graded, type GradeProgress } from './grade-pass'
import { stageKeys, type StageKeys } from './keys'
import { noPatches, patchPass, type Patched } from './patch-pass'
import { tileOrder } from './tile-order'
import { ladderPass, type Ladder } from './ladder-pass'
import { LadderKeeper } from './ladder-resume'
import { breathe, type Pool } from './pool'
import { growingPreview, shownAverage, singleFrame } from './preview'
import { ProgressMeter } from './progress'
import { proofs, repeatProofs, type Proof } from './proofs'
import { layColours } from './colour-pass'
import { countSetAside, rankFrames, type Ranking } from './rank'
import { Restorer } from './restorer'
import { firstReference, refinePass, type Refined, type RefineProgress } from './refine-pass'
import { Stacker } from './stacker'
import { Stages, type StageStore } from './store'
import type { Surveyed } from './survey-frames'
import { luminanceImage, surveyPass } from './survey-pass'

export interface EngineOptions extends Omit<FrameStoreOptions, 'shared'> {
  pool: Pool
  store?: StageStore | null
  /** Least time between two savings of an unfinished pass, ms. */
  checkpointMs?: number
}

/** Everything a finished run consists of. */
export interface RunState {
  recipe: Recipe
  /** The measure that ranked. */
  measure: ScoreMeasure
  keys: StageKeys
  surveyed: Surveyed
  graded: Graded
  refined: Refined
  patched: Patched
  ranking: Ranking
  ladder: Ladder
  stacker: Stacker
  figurer: Figurer
  restorer: Restorer
  optics: Optics | null
  /** Null until they are complete. */
  proofs: Proof[] | null
  evidence: Promise<Evidence> | null
}

/** Bytes of a ladder that are kept beyond the page. */
const MOST_LADDER_BYTES = 256 * 2 ** 20

export class Engine {
  readonly reader: FrameReader
  readonly frames: FrameStore
  readonly timings: Record<string, number> = {}
  readonly #pool: Pool
  readonly #stages: Stages
  readonly #checkpointMs: number
  readonly #results = new Map<string, { key: string, value: unknown }>()
  #state: RunState | null = null
  #emit: (event: RunEvent) => void = () => undefined

  constructor(reader: FrameReader, options: EngineOptions) {
    this.reader = reader
    this.#pool = options.pool
    this.#stages = new Stages(options.store ?? null)
    this.#checkpointMs = options.checkpointMs ?? 5000
    this.frames = new FrameStore(reader, { ...options, shared: options.pool.shared && options.pool.size > 1 })
  }

  /** The last finished run, or null. */
  get state(): RunState | null { return this.#state }

  /** Runs the stages that the recipe needs and that are not there. Rejects with the signal's reason when cancelled. */
  async run(recipe: Recipe, optics: Optics | null, emit: (event: RunEvent) => void, signal: AbortSignal): Promise<RunState> {
    const progress = new ProgressMeter(report => emit({ kind: 'progress', progress: report }))
    const context: PassContext = { frames: this.frames, pool: this.#pool, signal, progress, emit }
    const keys = await stageKeys(this.reader.facts, recipe)
    const { seconds } = this.reader

    this.#emit = emit
    const surveyed = await this.#stage('survey', keys.survey, () => surveyPass(context, recipe))
    const by = rankingMeasure(recipe.score.rankBy, surveyed.survey.kind)
    this.#emitSurvey(surveyed, by, emit)

    const graded = await this.#stage('grade', keys.grade, () => this.#grade(context, surveyed, recipe, keys))
    emit({ kind: 'frames', columns: frameColumns(graded.table, null, null, by, seconds), complete: recipe.register.refineRounds === 0 })

    const refined = await this.#stage('refine', keys.refine, () => this.#refine(context, surveyed, graded, recipe, keys))
    const ranking = rankFrames({ score: scoreColumn(graded.table, refined.shifts, by), setAside: refined.shifts.setAside })
    emit({ kind: 'frames', columns: frameColumns(graded.table, refined.shifts, ranking.rank, by, seconds), complete: true })
    emit({ kind: 'ranked', ranked: ranking.order.length, setAside: countSetAside(refined.shifts.setAside) })

    const patched = surveyed.survey.kind === 'star' || recipe.register.patches === 'never'
      ? noPatches
      : await this.#stage('patches', keys.patches, () => patchPass(context, surveyed, refined, recipe))
    if (patched.figures) emit({ kind: 'field', figures: patched.figures })
    const tiles = patched.field ? tileOrder(patched.field, scoreColumn(graded.table, refined.shifts, by), refined.shifts.setAside) : null

    const ladder = await this.#stage('ladder', keys.ladder, () => ladderPass(context, surveyed, refined.shifts, ranking, recipe.combine.kernel, {
      tiles, keeper: this.#stages.keeps ? new LadderKeeper(this.#stages, keys.ladder) : null, checkpointMs: 2 * this.#checkpointMs,
    }))
    const same = this.#state?.ladder === ladder && this.#state.recipe.register.alignColours === recipe.register.alignColours ? this.#state : null
    const stacker = same?.stacker ?? new Stacker(ladder, ranking.order, refined.shifts, this.frames, surveyed.plan, tiles)
    if (!same && recipe.register.alignColours) await layColours(stacker, ladder, surveyed, refined.reference)
    const unchanged = same !== null && canonicalJson(same.optics) === canonicalJson(optics)
    const figurer = unchanged ? same.figurer : new Figurer({ stacker, ladder, order: ranking.order, peak: graded.table.peak, surveyed, optics })
    const restorer = unchanged ? same.restorer : new Restorer({ stacker, ladder, surveyed, optics, shifts: refined.shifts })
    this.#state = { recipe, measure: by, optics, keys, surveyed, graded, refined, patched, ranking, ladder, stacker, figurer, restorer, proofs: unchanged ? same.proofs : null, evidence: unchanged ? same.evidence : null }
    const { counts, width, height, planes } = ladder
    if (counts.length > 0) emit({ kind: 'ladder', ladder: { counts, width, height, planes } })
    const state = this.#state
    if (state.proofs) repeatProofs(state.proofs, emit)
    else state.proofs = await this.#timed('proofs', () => proofs(state, this.averageShown(), context))
    return state
  }

  /** The mean of exactly the best `count` frames (dragging: or of the nearest rung); restored as the last run's recipe says where asked. */
  async stack(count: number, restored: boolean, signal?: AbortSignal, dragging = false, part: Part | null = null): Promise<StackImage> {
    const { stacker, recipe, restorer, surveyed } = this.#need()
    const image = await stacker.stack(dragging ? stacker.nearAtHand(count) : count, signal)
    if (!restored || restoringMethod(recipe.restore.method, surveyed.survey.kind) === 'nothing') return image
    return await restorer.restored(image, recipe.restore, pauseFor(signal), dragging, part)
  }

  /** The numbers that the last run's restoration comes to for the best `count` frames. */
  restorePlan(count: number): Promise<RestorePlan> {
    const { restorer, recipe } = this.#need()
    return restorer.plan(count, recipe.restore, pauseFor())
  }

  /** A star's transfer over the telescope's own, in the best `count` frames; null for other targets. */
  async starTransfer(count: number): Promise<{ step: number, values: number[] } | null> {
    const curve = await this.#need().restorer.star(count, pauseFor())
    return curve && { step: curve.step, values: [...curve.values] }
  }

  /** Evidence for the keep fraction of the last run; computed once. */
  evidence(): Promise<Evidence> {
    const state = this.#need()
    state.evidence ??= evidenceOf(state, this.frames, pauseFor())
    return state.evidence
  }

  async figures(count: number): Promise<StackFigures> {
    const { figurer, stacker } = this.#need()
    return figurer.of(await stacker.stack(count))
  }

  provenance(): Provenance {
    return { lullVersion, path: hasSimd() ? 'simd' : 'plain', engine: engineName(), timings: { ...this.timings } }
  }

  /** True where the browser's store holds something of this capture to go on from. */
  async resumable(): Promise<boolean> {
    return await this.#stages.knows(this.reader.facts.fingerprint)
  }

  frame(index: number): Promise<StackImage> {
    return singleFrame(this.frames, index, this.#result<Surveyed>('survey')?.plan ?? null)
  }

  average(): StackImage {
    const { graded, surveyed } = this.#need()
    return averageImage(this.reader.facts, graded, surveyed.scale)
  }

  /** The average as it is shown and judged beside stacks: hot pixels repaired, a mosaic as colour. */
  averageShown(): StackImage {
    return shownAverage(this.average(), this.#need().surveyed.plan)
  }

  close(): void {
    this.frames.clear()
    this.#results.clear()
    this.#state = null
    this.reader.close()
  }

  #need(): RunState {
    if (!this.#state) throw new Error('Nothing is stacked yet: run the recipe first.')
    return this.#state
  }

  #result<T>(stage: string): T | null {
    return (this.#results.get(stage)?.value ?? null) as T | null
  }

  /** A stage's result from this page, from the store, or computed now. */
  async #stage<T>(stage: Pass, key: string, compute: () => Promise<T>): Promise<T> {
    const known = this.#results.get(stage)
    if (known?.key === key) return known.value as T
    const stored = await this.#stages.load<T>(stage, key)
    const value = stored ?? await this.#timed(stage, compute)
    this.#results.set(stage, { key, value })
    if (!stored) await this.#keep(stage, key, value)
    return value
  }

  /** Saves a stage's result. A ladder is large: nobody waits for it, and one that is too large is added up again. */
  async #keep(stage: Pass, key: string, value: unknown): Promise<void> {
    if (stage !== 'ladder') return await this.#stages.save(stage, key, value)
    const { sums, halves } = value as Ladder
    const bytes = sums.reduce((sum, each) => sum + each.byteLength, 0) + halves.reduce((sum, each) => sum + each.byteLength, 0)
    if (bytes <= MOST_LADDER_BYTES) void this.#stages.save(stage, key, value)
  }

  async #timed<T>(pass: Pass, work: () => Promise<T>): Promise<T> {
    const start = performance.now()
    const value = await work()
    const ms = performance.now() - start
    this.timings[pass] = ms
    this.#emit({ kind: 'timing', pass, startedAt: performance.timeOrigin + start, ms })
    return value
  }

  async #grade(context: PassContext, surveyed: Surveyed, recipe: Recipe, keys: StageKeys): Promise<Graded> {
    const first = firstReference(surveyed)
    const register = recipe.register.refineRounds > 0 ? null : makeRegisterPlan(surveyed.survey, recipe, surveyed.plan.width, surveyed.plan.height, first.luminance, first.x, first.y)
    const resume = await this.#stages.load<GradeProgress & { blockFrames: number }>('grading', keys.grade)
    const by = rankingMeasure(recipe.score.rankBy, surveyed.survey.kind)
    const graded = await gradePass(context, surveyed, {
      register,
      resume: resume?.blockFrames === this.frames.blockFrames ? resume : null,
      checkpoint: async (progress) => {
        await this.#stages.save('grading', keys.grade, { ...progress, blockFrames: this.frames.blockFrames })
        await this.#stages.save('capture', this.reader.facts.fingerprint, { known: true })
      },
      checkpointMs: this.#checkpointMs,
      onGrowth: async (table) => {
        context.emit({ kind: 'frames', columns: frameColumns(table, null, null, by, this.reader.seconds), complete: false })
        const image = await growingPreview(context, surveyed, table)
        if (image) context.emit({ kind: 'preview', image })
      },
    })
    await this.#stages.drop('grading', keys.grade)
    await this.#stages.save('capture', this.reader.facts.fingerprint, { known: true })
    return graded
  }

  async #refine(context: PassContext, surveyed: Surveyed, graded: Graded, recipe: Recipe, keys: StageKeys): Promise<Refined> {
    const refined = await refinePass(context, surveyed, graded.table, recipe, {
      resume: await this.#stages.load<RefineProgress>('refining', keys.refine),
      checkpoint: progress => this.#stages.save('refining', keys.refine, progress),
      checkpointMs: this.#checkpointMs,
    })
    await this.#stages.drop('refining', keys.refine)
    return refined
  }

  #emitSurvey({ survey, score, plan }: Surveyed, rankBy: ScoreMeasure, emit: (event: RunEvent) => void): void {
    const chosen = { rankBy, blurPx: score.blurPx, windowPx: score.windowPx, centre: score.centre, kind: survey.kind }
    const preview = luminanceImage(survey.reference, plan.width, plan.height, 1)
    emit({ kind: 'surveyed', target: survey.kind, chosen, noise: survey.noise, noSignal: survey.noSignal, preview })
  }
}

/** Lets waiting messages in, and ends work that nobody waits for any more. */
function pauseFor(signal?: AbortSignal): () => Promise<void> {
  return async () => {
    await breathe()
    signal?.throwIfAborted()
  }
}
