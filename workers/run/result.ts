import { displayRange } from './stretch'
import type { Recipe } from '../../shared/schemas/recipe'
import { keepCount, proofFractions, type RunResult } from '../../shared/schemas/run'
import type { Engine } from './engine'
import { countSetAside } from './rank'

/** Everything that a finished run states about itself; with its evidence, which takes its time, where that is asked for. Throws where no run is finished. */
export async function runResult(engine: Engine, recipe: Recipe, recipeHash: string, withEvidence = false): Promise<RunResult> {
  const state = engine.state
  if (!state) throw new Error('Nothing is stacked yet: run the recipe first.')
  const { surveyed: { survey, score }, stacker, figurer, ladder, refined, graded } = state
  const count = keepCount(recipe.keep.fraction, stacker.ranked)
  const image = await stacker.stack(count)
  const known = new Map(state.proofs?.map(proof => [proof.fraction, proof.figures]))
  const proofs = []
  for (const fraction of proofFractions) proofs.push(known.get(fraction) ?? figurer.of(await stacker.stack(keepCount(fraction, stacker.ranked))))
  const { counts, width, height, planes } = ladder
  const restoration = await engine.restorePlan(count)
  return {
    facts: engine.reader.facts, recipe, recipeHash, kind: survey.kind,
    chosen: { rankBy: state.measure, blurPx: score.blurPx, windowPx: score.windowPx, centre: score.centre, kind: survey.kind },
    keep: { fraction: recipe.keep.fraction, count },
    ranked: stacker.ranked, setAside: countSetAside(refined.shifts.setAside),
    figures: figurer.of(image), proofs, average: known.get('average') ?? figurer.ofAverage(engine.averageShown(), graded.table.count),
    ladder: { counts, width, height, planes }, ...(state.patched.figures ? { field: state.patched.figures } : {}), ...(stacker.colours ? { colours: stacker.colours } : {}),
    stretch: displayRange(image), restoration, ...(withEvidence ? { evidence: await engine.evidence(), starTransfer: await engine.starTransfer(count) } : {}), provenance: engine.provenance(),
  }
}
