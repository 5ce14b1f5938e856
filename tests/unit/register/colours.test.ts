import { describe, expect, it } from 'vitest'
import { nodePool } from '../../../scripts/lib/node-pool'
import { defaultRecipe, type Recipe } from '../../../shared/schemas/recipe'
import { dispersionArcsec, refractivity, USUAL_AIR } from '../../../shared/astro/dispersion'
import { colourSpread } from '../../../shared/astro/colours'
import { demoScene, rehearsalReader } from '../../../workers/rehearse/index'
import { pixelScaleArcsec, type RehearsalSpec } from '../../../workers/rehearse/spec'
import { shiftPlane } from '../../../workers/register/colours'
import { Engine } from '../../../workers/run/engine'

describe('dispersion of air', () => {
  it('gives the index of dry air', () => {
    // Edlén 1953 as in Filippenko 1982, PASP 94, 715, eq. 1: 15 °C, 760 mm, dry (recomputed by an independent script).
    expect(refractivity(500, { ...USUAL_AIR, vapourMmHg: 0 })).toBeCloseTo(278.964, 2)
  })

  it('gives the table of Filippenko 1982 within its rounding', () => {
    // Filippenko 1982, PASP 94, 715, Table I: 600 mm, 7 °C, 8 mm of vapour, against 500 nm (recomputed by an independent script).
    const mountain = { pressureMmHg: 600, temperatureC: 7, vapourMmHg: 8 }
    const waves = [350, 400, 450, 550, 600, 650, 700, 800, 900, 1000]
    const table: [number, number[]][] = [
      [1.1, [0.55, 0.29, 0.12, -0.09, -0.15, -0.20, -0.24, -0.30, -0.34, -0.37]],
      [1.5, [1.34, 0.71, 0.29, -0.21, -0.37, -0.50, -0.60, -0.74, -0.84, -0.91]],
      [2.0, [2.08, 1.10, 0.45, -0.33, -0.58, -0.77, -0.92, -1.15, -1.30, -1.40]],
      [3.0, [3.40, 1.80, 0.74, -0.54, -0.95, -1.26, -1.51, -1.87, -2.12, -2.29]],
    ]
    for (const [secant, row] of table) {
      const altitude = 90 - Math.acos(1 / secant) * 180 / Math.PI
      row.forEach((value, k) => expect(Math.abs(dispersionArcsec(waves[k]!, 500, altitude, mountain) - value)).toBeLessThan(0.02))
    }
  })

  it('gives the usual filters at sea level', () => {
    // Same formula, 760 mm, 15 °C, 8 mm (recomputed by an independent script); an IAU-derived refraction routine gives 0.867″ for the first at 45°.
    expect(dispersionArcsec(450, 650, 45)).toBeCloseTo(0.872, 2)
    expect(dispersionArcsec(530, 620, 30)).toBeCloseTo(0.557, 2)
    expect(dispersionArcsec(460, 530, 20)).toBeCloseTo(1.096, 2)
  })
})

describe('the words for the colours', () => {
  it('say where the zenith lies by where blue lay', () => {
    // Blue recorded 3 px above and 1 px right of red: planes are moved back by that.
    const spread = colourSpread({ red: { dx: 0.5, dy: -1.5 }, blue: { dx: -0.5, dy: 1.5 } }, 0.2, 45, 0)!
    expect(spread.px).toBeCloseTo(Math.sqrt(10), 10)
    expect(spread.arcsec).toBeCloseTo(0.2 * Math.sqrt(10), 10)
    expect(spread.towardDeg).toBeCloseTo(18.435, 3)
    expect(spread.offVerticalDeg).toBeCloseTo(18.435, 3)
    expect(spread.expectedArcsec).toBeGreaterThan(0.7)
    expect(colourSpread({ red: null, blue: null }, 0.2, 45, 0)).toBeNull()
  })
})

describe('a plane moved by a windowed sinc', () => {
  it('keeps a wave of four pixels to a hundredth', () => {
    const n = 64
    const wave = (x: number, y: number) => Math.cos(2 * Math.PI * x / 4 + 0.3) + Math.sin(2 * Math.PI * y / 5)
    const plane = Float32Array.from({ length: n * n }, (_, i) => wave(i % n, Math.floor(i / n)))
    const out = new Float32Array(n * n)
    shiftPlane(plane, n, n, 0.37, -1.61, out)
    let worst = 0
    for (let y = 10; y < n - 10; y++) for (let x = 10; x < n - 10; x++) worst = Math.max(worst, Math.abs(out[y * n + x]! - wave(x - 0.37, y + 1.61)))
    expect(worst).toBeLessThan(0.01)
  })
})

describe('colours of a rehearsal drawn apart by the air', () => {
  const spec: RehearsalSpec = { ...demoScene('planet'), seed: 71, frames: 60, dispersion: { altitudeDeg: 28, zenithDeg: -70 } }
  const run = async (recipe: Recipe, of = spec) => {
    const engine = new Engine(await rehearsalReader(of), { pool: nodePool(1), budgetBytes: 2 ** 28 })
    await engine.run(recipe, null, () => undefined, new AbortController().signal)
    return engine
  }

  it('are found along the vertical, as far apart as the formula says', async () => {
    const engine = await run(defaultRecipe)
    const { colours } = await engine.stack(20, false)
    const scale = pixelScaleArcsec(spec.optics)
    for (const [plane, nm] of [['red', 620], ['blue', 450]] as const) {
      const raised = dispersionArcsec(nm, 530, 28) / scale
      // What moves a plane onto green undoes what the air did.
      expect(Math.abs(colours![plane]!.dx + raised * Math.cos(-70 * Math.PI / 180))).toBeLessThan(0.12)
      expect(Math.abs(colours![plane]!.dy + raised * Math.sin(-70 * Math.PI / 180))).toBeLessThan(0.12)
    }
  }, 60_000)

  it('are near where they belong without dispersion, and left alone where the recipe says so', async () => {
    const engine = await run(defaultRecipe, { ...spec, dispersion: undefined })
    const { colours } = await engine.stack(20, false)
    for (const plane of ['red', 'blue'] as const) expect(Math.hypot(colours![plane]!.dx, colours![plane]!.dy)).toBeLessThan(0.1)
    const plain = await run({ ...defaultRecipe, register: { ...defaultRecipe.register, alignColours: false } })
    expect((await plain.stack(20, false)).colours).toBeUndefined()
  }, 60_000)
})
