import { recipeHash } from '../../shared/recipe/canonical'
import type { CaptureFacts } from '../../shared/schemas/capture'
import type { Recipe } from '../../shared/schemas/recipe'

/**
 * A key per stage over the inputs that matter to it, and no others: two runs with equal keys have equal
 * results, so a stage runs only when its key is new. keep and restore appear nowhere: they read no frame.
 * The ranking measure does not reach the shifts: the reference is chosen by a measure that fits the target,
 * so that a change of the ranking never registers again.
 */
export interface StageKeys { survey: string, grade: string, refine: string, patches: string, ladder: string }

/** Raise when the arithmetic of any stage changes, so that nothing stale is taken from a browser's store. */
const CORE_VERSION = 6

export async function stageKeys(facts: CaptureFacts, recipe: Recipe): Promise<StageKeys> {
  const { register } = recipe
  const survey = {
    core: CORE_VERSION, fingerprint: facts.fingerprint, mosaic: facts.mosaic, byteOrder: facts.byteOrder.value,
    repair: recipe.prepare.repairHotPixels, blurPx: recipe.score.blurPx, windowPx: register.windowPx, centre: register.centre,
  }
  // Without a refinement the first pass registers, and the method counts from the start.
  const refined = register.refineRounds > 0
  const grade = { ...survey, method: refined ? null : register.method }
  const refine = { ...grade, method: register.method, referenceFraction: refined ? register.referenceFraction : null, rounds: register.refineRounds }
  const patches = { ...refine, patches: register.patches, patchPlaces: register.patchPlaces }
  const ladder = { ...patches, rankBy: recipe.score.rankBy, kernel: recipe.combine.kernel }
  const [a, b, c, d, e] = await Promise.all([survey, grade, refine, patches, ladder].map((inputs, stage) => recipeHash({ stage, ...inputs })))
  return { survey: a!, grade: b!, refine: c!, patches: d!, ladder: e! }
}
