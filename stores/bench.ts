/**
 * The open capture on the bench: what it says of itself, the recipe with its history, the passes as they go, and
 * the stack on the screen. Owns the core's handle; the screens only look and call.
 */
import { defineStore } from 'pinia'
import type { CaptureInput, FrameColumns, Optics, Part, PassProgress, RunEvent, StackImage } from '~~/workers/api'
import type { Evidence } from '~~/shared/schemas/evidence'
import type { CaptureFacts, CaptureOverrides, TargetKind } from '~~/shared/schemas/capture'
import type { UsedCalibration } from '~~/shared/schemas/calibration'
import type { MeasureRequest, MeasureResult, RunMeasure } from '~~/shared/schemas/measure'
import { readRecipe } from '~~/shared/recipe/migrate'
import { withRecipeValue } from '~~/shared/recipe/sentences'
import { defaultRecipe, restoringMethod, type Recipe } from '~~/shared/schemas/recipe'
import { keepCount, type DisplayStretch, type FieldFigures, type LadderInfo, type Provenance, type StackFigures } from '~~/shared/schemas/run'
import { autoStretch } from '~/composables/useStretch'
import { rememberBench, recallBench } from '~/composables/useBenchMemory'
import { CoreStopped, useCore, type CoreHandle } from '~/composables/useCore'

export type BenchPhase = 'empty' | 'opening' | 'running' | 'ready' | 'cancelled'
export interface SavedRecipe { id: string, name: string, version: number, versionId: string, mine: boolean, recipe: Recipe }
/** Optics beyond what captures say. */
export interface OpticsExtra { obstruction: number, wavelengthNm: number, instrumentId: string | null }
export interface Proof { fraction: number, image: StackImage, figures: StackFigures }

const HISTORY = 200
/** Pixels of a picture that is restored part by part. */
const LARGE = 1_000_000
const keepsOnly = (a: Recipe, b: Recipe) => JSON.stringify({ ...a, keep: 0, restore: 0 }) === JSON.stringify({ ...b, keep: 0, restore: 0 })

export const useBenchStore = defineStore('bench', () => {
  let core: CoreHandle | null = null
  const phase = ref<BenchPhase>('empty')
  const input = shallowRef<CaptureInput | null>(null)
  const facts = shallowRef<CaptureFacts | null>(null)
  const overrides = ref<CaptureOverrides>({})
  const extra = ref<OpticsExtra>({ obstruction: 0, wavelengthNm: 550, instrumentId: null })
  const problem = ref<string | null>(null)
  const resumed = ref(false)

  const recipe = shallowRef<Recipe>(defaultRecipe)
  const saved = shallowRef<SavedRecipe | null>(null)
  const past = shallowRef<Recipe[]>([])
  const future = shallowRef<Recipe[]>([])

  const progress = shallowRef<PassProgress | null>(null)
  const columns = shallowRef<FrameColumns | null>(null)
  const kind = ref<TargetKind | null>(null)
  const chosen = shallowRef<{ blurPx: number, windowPx: number, centre: { x: number, y: number }, kind?: TargetKind } | null>(null)
  const noSignal = ref(false)
  const ranked = ref(0)
  const setAside = ref<Record<string, number>>({})
  const ladder = shallowRef<LadderInfo | null>(null)
  const proofs = shallowRef<Proof[]>([])
  const average = shallowRef<{ image: StackImage, figures: StackFigures } | null>(null)
  const provenance = shallowRef<Provenance | null>(null)
  const field = shallowRef<FieldFigures | null>(null)
  const evidence = shallowRef<Evidence | null>(null)

  const image = shallowRef<StackImage | null>(null)
  const figures = shallowRef<StackFigures | null>(null)
  const stretch = ref<DisplayStretch>({ black: 0, white: 1, gamma: 1 })
  const stretchIsAuto = ref(true)
  const showRestored = ref(true)
  const dragging = ref(false)
  /** The part of the picture on the screen, whole px. */
  const visible = shallowRef<Part | null>(null)

  /** The last measure, and the recipe that it belongs to: another recipe makes another stack. */
  const measured = shallowRef<MeasureResult | null>(null)
  const measuredFor = ref('')
  const measuredAt = ref<string | null>(null)
  const measuring = ref(false)
  const measureProblem = ref<string | null>(null)
  const calibration = shallowRef<UsedCalibration | null>(null)

  const count = computed(() => keepCount(recipe.value.keep.fraction, ranked.value))
  const optics = computed<Optics | null>(() => {
    const f = facts.value
    if (!f?.apertureMm || !f.focalLengthMm || !f.pixelSizeUm) return null
    return { apertureMm: f.apertureMm, focalLengthMm: f.focalLengthMm, pixelSizeUm: f.pixelSizeUm, obstruction: extra.value.obstruction, wavelengthNm: extra.value.wavelengthNm }
  })
  const scale = computed(() => (facts.value?.pixelSizeUm && facts.value.focalLengthMm ? 206.264806 * facts.value.pixelSizeUm / facts.value.focalLengthMm : null))
  /** Whether the recipe restores this target at all. */
  const restores = computed(() => kind.value !== null && restoringMethod(recipe.value.restore.method, kind.value) !== 'nothing')
  const changed = computed(() => saved.value === null || JSON.stringify(saved.value.recipe) !== JSON.stringify(recipe.value))
  const busy = computed(() => phase.value === 'running' || phase.value === 'opening')

  function clearResults() {
    progress.value = null; columns.value = null; kind.value = null; chosen.value = null; noSignal.value = false; ranked.value = 0
    setAside.value = {}; ladder.value = null; proofs.value = []; average.value = null; provenance.value = null; evidence.value = null
    image.value = null; figures.value = null; stretchIsAuto.value = true
    measured.value = null; measureProblem.value = null
  }

  /** Opens a capture; a bad one leaves its message and a bench that can open the next. */
  async function open(next: CaptureInput, corrected: CaptureOverrides = {}, keepRecipe = false) {
    core ??= useCore()
    const wasOpen = facts.value !== null
    phase.value = 'opening'
    problem.value = null
    try {
      const answer = await core.open(next, corrected)
      if (!answer.ok) {
        problem.value = answer.problem.message
        clearResults()
        facts.value = null
        phase.value = 'empty'
        return false
      }
      clearResults()
      input.value = next
      facts.value = answer.facts
      overrides.value = corrected
      resumed.value = answer.resumable
      const memory = recallBench(answer.facts.fingerprint)
      if (!keepRecipe) {
        recipe.value = memory?.recipe ?? (wasOpen || past.value.length ? { ...recipe.value, register: { ...recipe.value.register, centre: null } } : defaultRecipe)
        past.value = []
        future.value = []
        if (memory) extra.value = memory.extra
        // Corrections made the last time are made again, which opens the file once more only where they matter.
        if (memory && Object.keys(memory.overrides).length && Object.keys(corrected).length === 0) return await open(next, memory.overrides, true)
      }
      void run()
      return true
    }
    catch (error) {
      failed(error)
      return false
    }
  }

  function failed(error: unknown) {
    problem.value = error instanceof Error ? error.message : String(error)
    phase.value = facts.value && !(error instanceof CoreStopped) ? 'cancelled' : 'empty'
    if (error instanceof CoreStopped) {
      clearResults()
      facts.value = null
    }
  }

  /** Corrects what the capture says; only what changes samples or their meaning is computed again (the core knows). */
  async function correct(next: CaptureOverrides) {
    if (!input.value) return
    await open(input.value, { ...overrides.value, ...next }, true)
  }

  /** Asks for the evidence once the bench is at rest: it takes some seconds of the worker's time. */
  async function gather(mine: number) {
    do await new Promise(resolve => setTimeout(resolve, 400))
    while (dragging.value && mine === runNumber)
    if (mine !== runNumber || !core) return
    try {
      const found = await core.evidence()
      if (mine !== runNumber) return
      evidence.value = found
      if (!found.signal) noSignal.value = true
    }
    catch { /* The next run asks again; the figures beside the stack do not depend on it. */ }
  }

  let runNumber = 0
  async function run() {
    if (!core || !facts.value) return
    const mine = ++runNumber
    phase.value = 'running'
    problem.value = null
    try {
      const { cancelled } = await core.run(recipe.value, optics.value, event => (mine === runNumber ? take(event) : undefined))
      if (mine !== runNumber) return
      progress.value = null
      phase.value = cancelled ? 'cancelled' : 'ready'
      if (!cancelled) {
        await follow()
        void gather(mine)
      }
    }
    catch (error) {
      if (mine === runNumber) failed(error)
    }
    remember()
  }

  function show(next: StackImage) {
    image.value = next
    if (stretchIsAuto.value) stretch.value = autoStretch(next)
  }

  function take(event: RunEvent) {
    switch (event.kind) {
      case 'progress': progress.value = event.progress; break
      case 'surveyed':
        field.value = null
        kind.value = event.target; chosen.value = event.chosen; noSignal.value = event.noSignal
        if (!ladder.value) show(event.preview)
        break
      case 'frames': columns.value = event.columns; break
      case 'preview': if (!ladder.value) show(event.image); break
      case 'ranked': ranked.value = event.ranked; setAside.value = event.setAside as Record<string, number>; break
      case 'field': field.value = event.figures; break
      case 'ladder': ladder.value = event.ladder; void follow(); break
      case 'proof':
        if (event.fraction === 'average') average.value = { image: event.image, figures: event.figures }
        else proofs.value = [...proofs.value.filter(proof => proof.fraction !== event.fraction), { fraction: event.fraction, image: event.image, figures: event.figures }].sort((a, b) => b.fraction - a.fraction)
        break
      case 'done': provenance.value = event.provenance; break
      case 'timing': break
    }
  }

  /** Asks for the wanted stack; while one is on its way only the last wish counts. The count shown is the image's own. */
  let following = false
  let slow = false
  let wish = ''
  const wishNow = () => `${count.value} ${showRestored.value && restores.value} ${dragging.value} ${JSON.stringify(recipe.value.restore)}`
  /** A large picture is restored where it is looked at first. */
  const partFirst = (restored: boolean) => restored && !dragging.value && visible.value !== null && image.value !== null
    && image.value.width * image.value.height > LARGE && visible.value.width * visible.value.height < 0.7 * image.value.width * image.value.height
  async function follow() {
    if (following) {
      // A restoration of seconds must not keep the slider waiting: a newer question ends it.
      if (slow && core && wishNow() !== wish) void core.stack(count.value, false, true).catch(() => undefined)
      return
    }
    if (!core || !ladder.value) return
    following = true
    try {
      for (;;) {
        const restored = showRestored.value && restores.value
        const wanted = wishNow()
        if (wanted === wish && image.value?.count === count.value) break
        if (wanted === wish && dragging.value) break
        wish = wanted
        slow = restored && !dragging.value
        try {
          if (partFirst(restored)) show(await core.stack(count.value, restored, false, visible.value))
          if (wishNow() === wanted) show(await core.stack(count.value, restored, dragging.value))
        }
        catch (error) {
          if ((error as Error).name !== 'AbortError') throw error
        }
        if (wishNow() === wanted) break
      }
      if (!dragging.value && image.value) figures.value = await core.figures(image.value.count)
    }
    catch (error) {
      if (!(error instanceof CoreStopped)) problem.value = (error as Error).message
    }
    finally {
      following = false
      slow = false
      if (core && ladder.value && image.value && !dragging.value && image.value.count !== count.value) {
        wish = ''
        void follow()
      }
    }
  }

  async function apply(next: Recipe) {
    const before = recipe.value
    if (JSON.stringify(before) === JSON.stringify(next)) return
    recipe.value = next
    remember()
    // Keep and restoration need no pass: the ladder has them.
    if (keepsOnly(before, next) && ladder.value && phase.value !== 'cancelled') {
      if (JSON.stringify(before.restore) !== JSON.stringify(next.restore)) await core?.run(next, optics.value, take).catch(() => undefined)
      return follow()
    }
    ladder.value = null
    evidence.value = null
    await run()
  }

  /** Changes the recipe, undoable. A drag of the slider is one change. */
  function change(next: Recipe, merge = false) {
    if (JSON.stringify(next) === JSON.stringify(recipe.value)) return
    if (!merge) {
      past.value = [...past.value.slice(-HISTORY), recipe.value]
      future.value = []
    }
    return apply(next)
  }
  function edit(path: string, value: unknown) {
    let next = withRecipeValue(recipe.value, path, value)
    // Gains set by hand begin with the measured ones.
    const measured = image.value?.restoration?.gains ?? []
    if (path === 'restore.gainBy' && value === 'hand' && measured.length > 0) {
      next = { ...next, restore: { ...next.restore, gains: next.restore.gains.map((gain, j) => Math.min(10, Math.max(0, Math.round(10 * (measured[j] ?? 1)) / 10 || 0))), thresholdsSigma: next.restore.thresholdsSigma.map(() => next.restore.thresholdSigma) } }
    }
    return change(readRecipe(next))
  }
  function undo() {
    const last = past.value.at(-1)
    if (!last) return
    past.value = past.value.slice(0, -1)
    future.value = [recipe.value, ...future.value]
    void apply(last)
  }
  function redo() {
    const next = future.value[0]
    if (!next) return
    future.value = future.value.slice(1)
    past.value = [...past.value, recipe.value]
    void apply(next)
  }

  /** What a measure depends on: everything but the restoration, which it never uses. */
  const measureKey = () => JSON.stringify({ ...recipe.value, restore: 0 })
  /** Measures the stars on the stack of the kept frames. A change of the recipe makes the measure void. */
  async function measureNow(request: Omit<MeasureRequest, 'fraction'>) {
    if (!core || measuring.value) return
    measuring.value = true
    measureProblem.value = null
    const key = measureKey()
    try {
      const result = await core.measure({ ...request, fraction: recipe.value.keep.fraction })
      if (key !== measureKey()) return
      measured.value = result
      measuredFor.value = key
      measuredAt.value = new Date().toISOString()
    }
    catch (error) {
      if ((error as Error).name !== 'AbortError' && !(error instanceof CoreStopped)) measureProblem.value = (error as Error).message
    }
    finally {
      measuring.value = false
    }
  }
  watch(recipe, () => { if (measured.value && measureKey() !== measuredFor.value) measured.value = null })
  const setCalibration = (next: UsedCalibration | null) => { calibration.value = next }
  /** The measure to be filed with the run; null where there is none of this recipe. */
  const runMeasure = computed<RunMeasure | null>(() => (measured.value?.kind === 'measured' && measuredAt.value ? { measure: measured.value, calibration: calibration.value, measuredAt: measuredAt.value } : null))

  let dragStart: Recipe | null = null
  /** Sets the keep fraction; `live` while a hand is on the slider. */
  function keep(fraction: number, live: boolean) {
    if (live && !dragging.value) {
      dragStart = recipe.value
      dragging.value = true
    }
    if (recipe.value.keep.fraction !== fraction) {
      const next = { ...recipe.value, keep: { fraction } }
      if (dragStart) {
        recipe.value = next
        void follow()
      }
      else void change(next)
    }
    if (!live && dragging.value) endDrag()
  }
  function endDrag() {
    if (!dragging.value) return
    dragging.value = false
    const start = dragStart
    dragStart = null
    if (start && start.keep.fraction !== recipe.value.keep.fraction) {
      past.value = [...past.value.slice(-HISTORY), start]
      future.value = []
    }
    remember()
    void follow()
  }

  function setStretch(next: DisplayStretch | 'auto') {
    stretchIsAuto.value = next === 'auto'
    if (next !== 'auto') stretch.value = next
    else if (image.value) stretch.value = autoStretch(image.value)
  }

  /** Applies a saved recipe to the open capture. Its window stays where the target is, unless it names a place. */
  function applySaved(next: SavedRecipe) {
    saved.value = next
    return change(next.recipe)
  }

  function remember() {
    if (facts.value && input.value) rememberBench({ fingerprint: facts.value.fingerprint, name: facts.value.name, input: input.value, recipe: recipe.value, overrides: overrides.value, extra: extra.value, finished: phase.value === 'ready' })
  }

  async function cancel() {
    await core?.cancel()
  }

  async function close() {
    runNumber++
    const was = core
    core = null
    phase.value = 'empty'
    facts.value = null
    input.value = null
    problem.value = null
    past.value = []
    future.value = []
    clearResults()
    await was?.close()
  }

  const exporter = () => core
  watch(showRestored, () => follow())

  return {
    phase, input, facts, overrides, extra, problem, resumed, recipe, saved, past, future, progress, columns, kind, chosen, noSignal, ranked, setAside, ladder, proofs, average, provenance, evidence, field,
    measured, measuring, measureProblem, runMeasure, measureNow, setCalibration,
    image, figures, stretch, stretchIsAuto, showRestored, dragging, visible, count, optics, scale, restores, changed, busy,
    open, correct, run, change, edit, undo, redo, keep, endDrag, setStretch, applySaved, cancel, close, remember, exporter,
  }
})
