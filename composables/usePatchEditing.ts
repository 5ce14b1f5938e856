import type { FieldFigures } from '~~/shared/schemas/run'

export interface DraftPatch { x: number, y: number, taken: boolean }

/** Most patches that a recipe can hold. */
const MOST = 96

/**
 * Patches moved, added and removed on the picture: one gesture, pointing at a place (by a click or the crosshair), adds a patch on free
 * ground, takes up the patch that is there, and puts down the one that is taken up.
 */
export function usePatchEditing(figures: () => FieldFigures | null) {
  const editing = ref(false)
  const draft = ref<DraftPatch[]>([])

  function begin() {
    draft.value = (figures()?.places ?? []).map(place => ({ ...place, taken: false }))
    editing.value = true
  }
  function leave() {
    editing.value = false
    draft.value = []
  }
  const rounded = (value: number) => Math.round(value * 10) / 10

  /** What happened, for the announcement. */
  function point(at: { x: number, y: number }): string {
    const near = (figures()?.windowPx ?? 64) / 6
    const taken = draft.value.find(patch => patch.taken)
    if (taken) {
      draft.value = draft.value.map(patch => (patch.taken ? { x: rounded(at.x), y: rounded(at.y), taken: false } : patch))
      return 'The patch is put down.'
    }
    const away = (patch: DraftPatch) => Math.hypot(patch.x - at.x, patch.y - at.y)
    const closest = draft.value.reduce<DraftPatch | null>((best, patch) => (best === null || away(patch) < away(best) ? patch : best), null)
    if (closest && away(closest) < near) {
      draft.value = draft.value.map(patch => (patch === closest ? { ...patch, taken: true } : patch))
      return 'The patch is taken up: point at its new place, or press Delete.'
    }
    if (draft.value.length >= MOST) return `There are ${MOST} patches already; remove one first.`
    draft.value = [...draft.value, { x: rounded(at.x), y: rounded(at.y), taken: false }]
    return `A patch is added; there are ${draft.value.length}.`
  }
  function remove(): string | null {
    if (!draft.value.some(patch => patch.taken)) return null
    draft.value = draft.value.filter(patch => !patch.taken)
    return `The patch is removed; there are ${draft.value.length}.`
  }
  return { editing, draft, begin, leave, point, remove, places: () => draft.value.map(({ x, y }) => ({ x, y })) }
}
