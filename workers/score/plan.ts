/** From what the survey found and the recipe asks to the plan of the scoring pass. */
import type { Recipe } from '../../shared/schemas/recipe'
import { makeGuide } from './follow'
import type { ScorePlan, Survey } from './types'

/** Clipped samples that spoil a star's core; one or two may be a cosmic ray. */
const STAR_CLIPPED = 3
/** Share of a frame's samples that spoils an extended target. */
const EXTENDED_CLIPPED = 0.001

export function makeScorePlan(survey: Survey, recipe: Pick<Recipe, 'register' | 'score'>, width: number, height: number): ScorePlan {
  return {
    width,
    height,
    kind: survey.kind,
    form: survey.form,
    blurPx: recipe.score.blurPx ?? survey.blurPx,
    windowPx: recipe.register.windowPx ?? survey.windowPx,
    centre: recipe.register.centre ?? survey.centre,
    noise: survey.noise,
    background: survey.background,
    saturatedSamples: survey.form === 'star' ? STAR_CLIPPED : Math.max(STAR_CLIPPED, Math.ceil(EXTENDED_CLIPPED * width * height)),
    guide: survey.form === 'field' ? makeGuide(survey.reference, width, height) : null,
  }
}
