import { expect, it } from 'vitest'
import { prepareLuminance, prepareRows } from '../../workers/prepare/frame'
import { makeRegisterPlan } from '../../workers/register/plan'
import { createRegistrar, emptyShift } from '../../workers/register/registrar'
import { surveyFrames } from '../../workers/run/survey-frames'
import { defaultRecipe } from '../../shared/schemas/recipe'
import { movingDouble } from './support/moving-double'

it('a star is registered the same from the rows that are looked at as from the whole frame', () => {
  const [width, height, frames] = [96, 200, 24]
  const { facts, samples } = movingDouble({ frames, width, height })
  const size = width * height
  const { plan, survey } = surveyFrames(facts, Array.from({ length: frames }, (_, i) => samples.subarray(i * size, (i + 1) * size)), defaultRecipe)
  const registrar = createRegistrar(makeRegisterPlan(survey, defaultRecipe, width, height, survey.reference, survey.refX, survey.refY))
  expect(registrar.reach).toBeLessThan(height / 2)
  const whole = new Float32Array(size)
  const part = new Float32Array(size)
  for (let frame = 0; frame < frames; frame++) {
    // Near the edges as well, where the window is cut off.
    for (const y of [survey.refY, survey.refY + 3.5, 4, height - 3]) {
      prepareLuminance(samples, frame * size, plan, whole)
      part.fill(Number.NaN)
      prepareRows(samples, frame * size, plan, Math.round(y) - registrar.reach!, Math.round(y) + registrar.reach!, part)
      const [a, b] = [emptyShift(), emptyShift()]
      registrar.register(whole, survey.refX, y, a)
      registrar.register(part, survey.refX, y, b)
      expect(b).toEqual(a)
    }
  }
})
