/** Measures a pair by the power spectrum of a finished run's frames. */
import { angleDifference } from '../../shared/astro/angles'
import type { FringeMeasure } from '../../shared/schemas/measure'
import { relativeTo, type Relative } from '../measure/pair/bootstrap'
import { directionOf } from '../measure/fringes/direction'
import { fitFringes, visibilityOf, type Fringe } from '../measure/fringes/fit'
import { radialPower, SpectrumSum, type MeanSpectra } from '../measure/fringes/spectrum'
import { prepareLuminance } from '../prepare/frame'
import type { RunState } from './engine'
import type { FrameStore } from './frames'

const BLOCKS = 20
const MOST_FRAMES = 3000
const MOST_WINDOW = 128
/** Flux ratio over its error from which fringes count, and the triple correlation from which it settles the side. */
const LEAST_SIGMAS = 5
const DIRECTION_SIGMAS = 4

/** Spectra of the ranked frames, spread over time where there are very many. */
export async function spectraOf({ surveyed: { plan }, ranking, graded }: RunState, frames: FrameStore, signal?: AbortSignal): Promise<MeanSpectra> {
  const { width, height } = plan
  const inTime = ranking.order.slice().sort()
  const wanted = Math.min(inTime.length, MOST_FRAMES)
  let n = 32
  while (n < MOST_WINDOW && n < Math.min(width, height)) n *= 2
  const sum = new SpectrumSum(width, height, n, Math.min(BLOCKS, wanted))
  const luminance = new Float32Array(width * height)
  let pause = performance.now()
  for (let k = 0; k < wanted; k++) {
    signal?.throwIfAborted()
    const index = inTime[Math.floor((k + 0.5) * inTime.length / wanted)]!
    const batch = await frames.frame(index, signal)
    prepareLuminance(batch.samples, batch.offset, plan, luminance)
    sum.add(luminance, Math.round(graded.table.x[index]!), Math.round(graded.table.y[index]!), Math.floor(k * sum.blocks.length / wanted))
    if (performance.now() - pause > 40) {
      await new Promise<void>(resolve => setTimeout(resolve, 0))
      pause = performance.now()
    }
  }
  return sum.take()
}

export function fringesOf(spectra: MeanSpectra, reference: MeanSpectra | null = null): FringeMeasure {
  const radial = radialPower(spectra)
  const base = {
    frames: spectra.blocks.reduce((sum, block) => sum + block.frames, 0), blocks: spectra.blocks.length,
    values: null, visibility: null, directionSigmas: null,
    drownsAt: radial.drownsAt, windowPx: spectra.n, radialPower: radial.values,
  }
  const found = fitFringes(spectra, { reference })
  if (!found || found.answers.length === 0) return base
  const { fit, answers } = found
  const direction = directionOf(spectra, fit.dx, fit.dy)
  const relative = (one: Fringe): Relative => relativeTo({ x: 0, y: 0, flux: 1 }, { x: direction.sign * one.dx, y: direction.sign * one.dy, flux: one.beta })
  const value = relative(fit)
  const others = answers.map(relative)
  const jackknife = (away: (one: Relative) => number) => {
    const mean = others.reduce((sum, one) => sum + away(one), 0) / others.length
    return Math.sqrt((others.length - 1) / others.length * others.reduce((sum, one) => sum + (away(one) - mean) ** 2, 0))
  }
  const errors = { sepPxErr: jackknife(one => one.sepPx), paDegErr: jackknife(one => angleDifference(one.paDeg, value.paDeg)), dMagErr: jackknife(one => one.dMag) }
  // d(Δm) = 1.0857 dβ/β: so many errors is the flux ratio away from none.
  const stands = errors.dMagErr < 1.0857 / LEAST_SIGMAS && fit.misfit < 0.9 * fit.misfitWithout
  return {
    ...base, visibility: visibilityOf(fit.beta), directionSigmas: direction.significance,
    values: stands ? { ...value, ...errors, quadrant: direction.significance > DIRECTION_SIGMAS ? 'determined' : 'undetermined' } : null,
  }
}
