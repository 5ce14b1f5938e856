/** Rehearsed pairs with known truth, and what is measured of them. */
import { angleDifference } from '../../shared/astro/angles'
import { lambdaOverDArcsec } from '../../shared/optics'
import { defaultRecipe } from '../../shared/schemas/recipe'
import { rehearsalReader } from '../../workers/rehearse/reader'
import { demoScene } from '../../workers/rehearse/demos'
import { pixelScaleArcsec, type RehearsalSpec } from '../../workers/rehearse/spec'
import { Engine } from '../../workers/run/engine'
import { measurePair } from '../../workers/run/measure'
import { InlinePool } from '../../workers/run/pool'

export interface PairTruth { /** Separation in λ/D and in px, angle on the screen, magnitudes. */ sepLd: number, sepPx: number, paDeg: number, dMag: number, apertureOverR0: number, frames: number }
export interface Pull { error: number, pull: number }
export interface CaseLine extends PairTruth {
  index: number
  /** "measured", or why not; "wrong" where something else than the pair was measured. */
  outcome: 'measured' | 'wrong' | 'unresolved' | 'no-signal'
  sep?: Pull, angle?: Pull, mag?: Pull
}

/** Share of the case number along an axis: additive recurrence of the generalised golden ratio, which fills the space evenly. */
const share = (index: number, axis: number): number => (0.5 + (index + 1) * 1.1347241384015194 ** -(axis + 1)) % 1

/** Separations of 0.8-6 λ/D, Δm 0-4, D/r0 2-8, 500-4,000 frames, any angle. */
export function pairCase(index: number): { spec: RehearsalSpec, truth: PairTruth } {
  const base = demoScene('double')
  const sepLd = 0.8 * (6 / 0.8) ** share(index, 0)
  const dMag = 4 * share(index, 1)
  const apertureOverR0 = 2 + 6 * share(index, 2)
  const frames = Math.round(500 * 8 ** share(index, 3))
  const paDeg = 360 * share(index, 4)
  const separationArcsec = sepLd * lambdaOverDArcsec(base.optics.apertureMm, base.optics.wavelengthNm)
  const spec: RehearsalSpec = {
    ...base, name: `Pair ${index}`, seed: 5000 + 37 * index, width: 72, height: 72, frames, dropShare: 0,
    air: { ...base.air, apertureOverR0 },
    motion: { ...base.motion, startX: 0, startY: 0, rateXPxPerS: 0, rateYPxPerS: 0 },
    scene: { kind: 'stars', fluxElectrons: 42_000, stars: [{ separationArcsec: 0, positionAngleDeg: 0, deltaMag: 0 }, { separationArcsec, positionAngleDeg: paDeg, deltaMag: dMag }] },
  }
  return { spec, truth: { sepLd, sepPx: separationArcsec / pixelScaleArcsec(base.optics), paDeg, dMag, apertureOverR0, frames } }
}

export async function measureCase(index: number): Promise<CaseLine> {
  const { spec, truth } = pairCase(index)
  const reader = await rehearsalReader(spec)
  const engine = new Engine(reader, { pool: new InlinePool(), budgetBytes: 2 ** 28 })
  try {
    const state = await engine.run(defaultRecipe, null, () => undefined, new AbortController().signal)
    const measure = await measurePair(state, { components: 2, fraction: defaultRecipe.keep.fraction })
    if (measure.kind !== 'measured') return { index, ...truth, outcome: measure.kind }
    const value = measure.values[0]!
    // Nearly equal stars may change places: then the angle is the other one, and so it was said to be undetermined.
    const turned = value.quadrant === 'undetermined' && Math.abs(angleDifference(value.paDeg, truth.paDeg)) > 90
    const pa = turned ? value.paDeg + 180 : value.paDeg
    const error = { sep: value.sepPx - truth.sepPx, angle: angleDifference(pa, truth.paDeg), mag: (turned ? -value.dMag : value.dMag) - truth.dMag }
    const apart = Math.hypot(error.sep, truth.sepPx * error.angle * Math.PI / 180)
    return {
      index, ...truth, outcome: apart > Math.max(1.5, 5 * value.sepPxErr) ? 'wrong' : 'measured',
      sep: { error: error.sep, pull: error.sep / value.sepPxErr }, angle: { error: error.angle, pull: error.angle / value.paDegErr }, mag: { error: error.mag, pull: error.mag / value.dMagErr },
    }
  }
  finally {
    engine.close()
  }
}
