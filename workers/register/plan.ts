/** From what the survey found and the recipe asks to the plan of a registration pass. */
import type { Recipe } from '../../shared/schemas/recipe'
import type { Survey } from '../score/types'
import type { RegisterPlan } from './types'

/** @param reference luminance, full frame; its target lies at (refX, refY) */
export function makeRegisterPlan(
  survey: Survey, recipe: Pick<Recipe, 'register' | 'score'>, width: number, height: number,
  reference: Float32Array, refX: number, refY: number,
): RegisterPlan {
  return {
    width,
    height,
    method: survey.form === 'field' ? 'correlation' : survey.form === 'disc' && recipe.register.method === 'speckle' ? 'correlation' : recipe.register.method,
    form: survey.form,
    windowPx: recipe.register.windowPx ?? survey.windowPx,
    blurPx: recipe.score.blurPx ?? survey.blurPx,
    noise: survey.noise,
    reference,
    refX,
    refY,
  }
}
