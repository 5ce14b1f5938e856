/**
 * A filed run on a guest's or a mentor's screen: the ladder by ranges, one rung at a time, without the
 * capture. The wanted count snaps to rungs; while one is on its way, only the last wish is kept.
 */
import type { FrameColumns, StackImage } from '~~/workers/api'
import type { RunDetail } from '~~/shared/api/archive'
import { restoringMethod } from '~~/shared/schemas/recipe'
import type { RunResult } from '~~/shared/schemas/run'
import { useGuestCore } from './useCore'

/** Index of the rung nearest to a count; counts ascend. */
export function rungOf(counts: readonly number[], count: number): number {
  let best = 0
  counts.forEach((value, index) => { if (Math.abs(value - count) < Math.abs(counts[best]! - count)) best = index })
  return best
}

/** Whether a filed run's stack is restored. */
export const restoresRun = (result: RunResult) => (result.restoration ? result.restoration.method : restoringMethod(result.recipe.restore.method, result.kind)) !== 'nothing'

export function useFiledRun(run: Ref<RunDetail>) {
  const { ladder, keep } = run.value.result
  const counts = ref<number[]>([...new Set([...ladder.counts, keep.count])].sort((a, b) => a - b))
  const rung = ref(rungOf(counts.value, run.value.keep.count))
  const image = shallowRef<StackImage | null>(null)
  const average = shallowRef<StackImage | null>(null)
  const columns = shallowRef<FrameColumns | null>(null)
  const problem = ref<string | null>(null)
  const restored = ref(restoresRun(run.value.result))
  let core: ReturnType<typeof useGuestCore> | null = null
  let busy = false
  let asked = -1

  const count = computed(() => counts.value[rung.value] ?? run.value.keep.count)
  const fraction = computed(() => count.value / Math.max(1, run.value.result.ranked))
  const fileOf = (role: string) => run.value.files.find(file => file.role === role && file.state === 'received')

  /** Fetches the wanted rung, again if the wish changed meanwhile. */
  async function follow() {
    if (busy || !core) return
    busy = true
    try {
      while (core && asked !== rung.value * 2 + Number(restored.value)) {
        asked = rung.value * 2 + Number(restored.value)
        image.value = await core.stack(count.value, restored.value)
        problem.value = null
      }
    }
    catch (error) {
      asked = -1
      problem.value = error instanceof Error ? error.message : String(error)
    }
    finally {
      busy = false
    }
  }

  async function open() {
    const ladder = fileOf('ladder')
    const frames = fileOf('frames')
    if (!ladder || !frames) {
      problem.value = 'This run has no ladder file, so its slider cannot move. The picture and the figures are on the run’s page.'
      return
    }
    problem.value = null
    core = useGuestCore()
    try {
      const answer = await core.open({ ladderUrl: ladder.url, ladderBytes: ladder.sizeBytes, framesUrl: frames.url, averageUrl: fileOf('average')?.url ?? null, stackUrl: fileOf('stack')?.url ?? null, result: toRaw(run.value.result) })
      // Whoever moved the slider before the ladder was there keeps what was wished for.
      const wanted = count.value
      counts.value = answer.counts
      columns.value = answer.columns
      rung.value = rungOf(answer.counts, wanted)
      await follow()
    }
    catch (error) {
      problem.value = error instanceof Error ? error.message : String(error)
    }
  }
  /** A stack beside the shown one, for the proofs. */
  const stackOf = async (wanted: number) => (core ? await core.stack(wanted, false) : null)
  const loadAverage = async () => { average.value = core ? await core.average().catch(() => null) : null }

  watch([rung, restored], follow)
  onMounted(open)
  onBeforeUnmount(() => {
    core?.end()
    core = null
  })
  return { counts, rung, count, fraction, image, average, columns, problem, restored, open, stackOf, loadAverage }
}
