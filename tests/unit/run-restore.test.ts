/** Restoration through the engine: chosen by the kind of target, in parts, by every method, and never under the measures. */
import { afterAll, beforeAll, describe, expect, it } from 'vitest'
import { withRecipeValue } from '../../shared/recipe/sentences'
import { defaultRecipe, type Recipe } from '../../shared/schemas/recipe'
import { restorePlanSchema } from '../../shared/schemas/restoration'
import { demoScene, rehearsalReader } from '../../workers/rehearse/index'
import { Engine } from '../../workers/run/engine'
import { InlinePool } from '../../workers/run/pool'

const spec = { ...demoScene('terrain'), width: 128, height: 128, frames: 80 }
const open = async () => new Engine(await rehearsalReader(spec), { pool: new InlinePool(), budgetBytes: 2 ** 27 })
const run = (engine: Engine, recipe: Recipe) => engine.run(recipe, spec.optics, () => undefined, new AbortController().signal)
const detail = (samples: Float32Array) => {
  let sum = 0
  for (let i = 1; i < samples.length; i++) sum += (samples[i]! - samples[i - 1]!) ** 2
  return sum
}

describe('restoration of a stack', () => {
  let engine: Engine
  beforeAll(async () => {
    engine = await open()
    await run(engine, defaultRecipe)
  }, 60_000)
  afterAll(() => engine.close())

  it('is by wavelets with measured gains for an extended target, and says what it did', async () => {
    const plain = await engine.stack(8, false)
    const image = await engine.stack(8, true)
    expect(image.restored).toBe(true)
    expect(detail(image.samples)).toBeGreaterThan(1.5 * detail(plain.samples))
    expect(image.restoration).toMatchObject({ method: 'wavelets', reason: '' })
    expect(image.restoration!.noiseGain).toBeGreaterThan(0)
    expect(image.restoration!.apertureOverR0).toBeGreaterThan(1)
    expect(() => restorePlanSchema.parse(JSON.parse(JSON.stringify(plan)))).not.toThrow()
  })
  let plan: unknown
  beforeAll(async () => { plan = await engine.restorePlan(8) })

  it('gives a part as it is in the whole', async () => {
    const part = { x: 30, y: 40, width: 20, height: 10 }
    const whole = (await engine.stack(8, true)).samples
    const cut = (await engine.stack(8, true, undefined, false, part)).samples
    for (let y = 40; y < 50; y++) for (let x = 30; x < 50; x++) expect(cut[y * 128 + x]).toBe(whole[y * 128 + x])
    const plain = (await engine.stack(8, false)).samples
    expect(cut[5]).toBe(plain[5])
  })

  it('is the same bytes in another engine, and the figures do not know of it', async () => {
    const other = await open()
    await run(other, defaultRecipe)
    expect((await other.stack(8, true)).samples).toEqual((await engine.stack(8, true)).samples)
    const figures = await other.figures(8)
    await run(other, withRecipeValue(defaultRecipe, 'restore.method', 'nothing'))
    expect(await other.figures(8)).toEqual(figures)
    expect((await other.stack(8, true)).restored).toBe(false)
    other.close()
  }, 60_000)

  it.each(['wiener', 'richardson-lucy'] as const)('by %s raises detail too, and can be ended', async (method) => {
    const other = await open()
    await run(other, withRecipeValue(withRecipeValue(defaultRecipe, 'restore.method', method), 'restore.iterations', 8))
    const plain = (await other.stack(8, false)).samples
    const image = await other.stack(8, true)
    expect(image.restoration!.method).toBe(method)
    expect(detail(image.samples)).toBeGreaterThan(1.2 * detail(plain))
    const controller = new AbortController()
    const asked = other.stack(8, true, controller.signal)
    controller.abort()
    await expect(asked).rejects.toThrow()
    other.close()
  }, 60_000)
})

describe('restoration of a star', () => {
  it('is none by itself, and by the star\'s own image where it is asked for', async () => {
    const double = { ...demoScene('double'), width: 64, height: 64, frames: 120, cloud: null, motion: { ...demoScene('double').motion, startX: 0, startY: 0, rateXPxPerS: 0, rateYPxPerS: 0 } }
    const engine = new Engine(await rehearsalReader(double), { pool: new InlinePool(), budgetBytes: 2 ** 27 })
    const go = (recipe: Recipe) => engine.run(recipe, double.optics, () => undefined, new AbortController().signal)
    await go(defaultRecipe)
    expect((await engine.stack(12, true)).restored).toBe(false)
    await go(withRecipeValue(defaultRecipe, 'restore.method', 'richardson-lucy'))
    const plain = await engine.stack(12, false)
    const image = await engine.stack(12, true)
    expect(image.restoration!.method).toBe('richardson-lucy')
    // The halo goes back into the core.
    expect(Math.max(...image.samples)).toBeGreaterThan(1.2 * Math.max(...plain.samples))
    engine.close()
  }, 60_000)
})
