/**
 * Extended targets: FFT cross-correlation of windows, in two steps.
 *
 * 1. Band-passed, so that neither shading nor grain decides: this follows the image as a whole (the wavefront's tilt) and
 *    never locks onto a wrong feature.
 * 2. Near that place, with the reference deconvolved: each frequency is divided by the reference's own power (Wiener, with
 *    the frame's noise as the floor). What comes out is an estimate of the frame's point-spread function relative to the
 *    reference. Where it has one clear peak, that peak is where the light of the sharp image lies, and the shift is
 *    taken from there; its height over what the reference has with itself is the frame's `transfer`, a Strehl ratio for targets
 *    without a star. Where it has several, step 1 stands.
 */
import { steadyExp } from '../../shared/steadymath'
import { createForward, createInverse, multiply, spectrumLength } from './fft2'
import { createNewton, highest, secondHighest, type Maximum } from './maximum'
import type { Registrar } from './registrar'
import type { RegisterPlan } from './types'
import { createLoader } from './window'

/** Sigmas (px) of the Gaussians that take away shading and grain in the two steps; a disc is held by its limb, a field by its detail. */
const BROAD = { disc: { low: 6, high: 1.5 }, field: { low: 4, high: 1.5 } }
/** Step 2 begins at lower frequencies: a Strehl ratio is the transfer over all of them. */
const SHARP = { low: 9, high: 1 }
/** How far from step 1 the peak of step 2 is looked for, px. */
const REACH = 3.5
/** A second peak of step 2 as high as this share of the first leaves the shift at step 1. */
const CLEAR = 0.5
/** And so does a peak farther from it than this, px: then the two steps see different things. */
const NEAR = 0.5
/** A second candidate of step 1 as strong as this makes a frame unsure. */
const RUNNER_UP = 0.95
/** A window farther than this from where it belongs is cut out again, px. */
const AT_HOME = 1
const LEAST_SIGNIFICANCE = 5
/** Expected mean square of an optical transfer function in short exposures: weighs noise in the deconvolution. */
const TRANSFER_POWER = 0.1
const NEGLIGIBLE = 1e-2

const band = ({ low, high }: { low: number, high: number }, f2: number): number => {
  const rise = 1 - steadyExp(-2 * Math.PI * Math.PI * low * low * f2)
  return rise * rise * steadyExp(-4 * Math.PI * Math.PI * high * high * f2)
}

/** Working memory for windows of a size; registrars of the same size may share it, because each call leaves nothing behind. */
export function extendedWorkspace(n: number) {
  let cut = Math.max(2, n >> 3)
  // In large windows frequencies beyond a quarter of the sampling are left out: the band leaves a tenth of them, and the
  // transforms cost a third.
  const most = n >= 256 ? n / 4 - 1 : n / 2 - 1
  while (cut < most && band(SHARP, (cut / n) ** 2) > NEGLIGIBLE) cut++
  const forward = createForward(n, cut)
  const inverse = createInverse(n, cut)
  const length = spectrumLength(cut)
  const spectrum = new Float64Array(length)
  const product = new Float64Array(length)
  const window = new Float32Array(n * n)
  const { side } = inverse
  const map = new Float32Array(side * side)
  return { cut, forward, inverse, length, spectrum, product, window, side, map, step: n / side, refine: createNewton(cut, n) }
}

export function extendedRegistrar(plan: RegisterPlan, workspace = extendedWorkspace(plan.windowPx)): Registrar {
  const { windowPx: n, reference, refX, refY } = plan
  const { cut, forward, inverse, length, spectrum, product, window, side, map, step, refine } = workspace
  const broad = new Float64Array(length)
  const sharp = new Float64Array(length)
  const load = createLoader(plan)
  const broadBand = plan.form === 'disc' ? BROAD.disc : BROAD.field

  const refX0 = Math.round(refX) - n / 2
  const refY0 = Math.round(refY) - n / 2
  load(reference, refX0, refY0, window)
  forward.forward(window, spectrum)
  let mean = 0
  let weights = 0
  for (let kx = 0, o = 0; kx <= cut; kx++) {
    for (let ky = -cut; ky <= cut; ky++, o += 2) {
      const weight = band(SHARP, (kx * kx + ky * ky) / (n * n))
      mean += weight * (spectrum[o]! * spectrum[o]! + spectrum[o + 1]! * spectrum[o + 1]!)
      weights += weight
    }
  }
  const floor = 1e-3 * mean / weights + plan.noise * plan.noise * n * n / TRANSFER_POWER
  let broadPower = 0
  for (let kx = 0, o = 0; kx <= cut; kx++) {
    const both = kx === 0 ? 1 : 2
    for (let ky = -cut; ky <= cut; ky++, o += 2) {
      const f2 = (kx * kx + ky * ky) / (n * n)
      const re = spectrum[o]!
      const im = spectrum[o + 1]!
      const power = re * re + im * im
      const b = band(broadBand, f2)
      const s = band(SHARP, f2) / (power + floor)
      broad[o] = re * b
      broad[o + 1] = -im * b
      sharp[o] = re * s
      sharp[o + 1] = -im * s
      broadPower += both * power * b * b
    }
  }
  // What the reference gives with itself.
  multiply(spectrum, sharp, product)
  let own = 0
  for (let kx = 0, o = 0; kx <= cut; kx++) for (let ky = -cut; ky <= cut; ky++, o += 2) own += (kx === 0 ? 1 : 2) * product[o]!
  own /= n * n
  const noiseLevel = plan.noise * Math.sqrt(broadPower) / n
  const radius = Math.min(plan.reachPx ?? Infinity, n / 2 - Math.max(4, n / 16))
  const first: Maximum = { x: 0, y: 0, value: 0 }
  const second: Maximum = { x: 0, y: 0, value: 0 }

  return {
    register(luminance, expectedX, expectedY, out) {
      let x0 = Math.round(expectedX) - n / 2
      let y0 = Math.round(expectedY) - n / 2
      for (let pass = 0; pass < 2; pass++) {
        load(luminance, x0, y0, window)
        forward.forward(window, spectrum)
        multiply(spectrum, broad, product)
        inverse.inverse(product, map)
        highest(map, side, step, 0, 0, radius, first)
        if (pass > 0 || (Math.abs(first.x) < AT_HOME && Math.abs(first.y) < AT_HOME)) break
        x0 += Math.round(first.x)
        y0 += Math.round(first.y)
      }
      const runnerUp = secondHighest(map, side, step, first.x, first.y, 8, radius)
      refine(product, step, first)
      const ratio = first.value > 0 ? Math.max(0, runnerUp) / first.value : 1
      const significance = noiseLevel > 0 ? first.value / noiseLevel : Infinity
      out.confidence = Math.max(0, Math.min(1, (1 - ratio) * Math.min(1, significance / (2 * LEAST_SIGNIFICANCE))))
      out.sure = ratio < RUNNER_UP && significance > LEAST_SIGNIFICANCE

      multiply(spectrum, sharp, product)
      inverse.inverse(product, map)
      highest(map, side, step, first.x, first.y, REACH, second)
      const rival = secondHighest(map, side, step, second.x, second.y, 2.5, radius)
      refine(product, step, second)
      out.transfer = own > 0 ? second.value / own : NaN
      const near = Math.abs(second.x - first.x) < NEAR && Math.abs(second.y - first.y) < NEAR
      const clear = near && second.value > 0 && rival < CLEAR * second.value
      const found = clear ? second : first
      out.dx = refX0 - x0 - found.x
      out.dy = refY0 - y0 - found.y
    },
  }
}
