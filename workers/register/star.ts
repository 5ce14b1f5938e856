/**
 * Stars: FFT cross-correlation of the frame with the reference's star images.
 *
 * The reference is first reduced to its star images (places and strengths of its cores), and the frame, smoothed a
 * little, is correlated with those. The maximum is the brightest speckle for a single star, and for a double
 * the one speckle that both components agree on: weighted shift-and-add (Christou, Hege, Freeman & Ribak 1986,
 * JOSA A 3, 204, from memory). The halo in a plain stack would pull the shift toward the centroid.
 *
 * Sub-pixel: the correlation is a short Fourier sum; its maximum is found by Newton steps on that sum itself (the
 * limit of an upsampled DFT, Guizar-Sicairos, Thurman & Fienup 2008, Opt. Lett. 33, 156), so nothing pulls
 * toward whole pixels.
 */
import { steadyCos, steadyExp, steadySin } from '../../shared/steadymath'
import { createForward, createInverse, multiply, spectrumLength } from './fft2'
import { createNewton, highest, secondHighest, type Maximum } from './maximum'
import { starImages } from './reference'
import type { Registrar } from './registrar'
import type { RegisterPlan } from './types'
import { createLoader } from './window'

/** A second candidate as strong as this share of the first makes a frame unsure. */
const RUNNER_UP = 0.92
/** The maximum must stand this far over what white noise alone would give. */
const LEAST_SIGNIFICANCE = 5
/** Frequencies at which the smoothing leaves less are not computed. */
const NEGLIGIBLE = 1e-3

export function starRegistrar(plan: RegisterPlan): Registrar {
  const { width, height, windowPx: n, reference, refX, refY, blurPx } = plan
  const filter = (f2: number) => steadyExp(-2 * Math.PI * Math.PI * blurPx * blurPx * f2)
  let cut = Math.max(2, n >> 3)
  while (cut < n / 2 - 1 && filter((cut / n) ** 2) > NEGLIGIBLE) cut++
  const forward = createForward(n, cut)
  const inverse = createInverse(n, cut)
  const spectrum = new Float64Array(spectrumLength(cut))
  const pattern = new Float64Array(spectrumLength(cut))
  const window = new Float32Array(n * n)
  const { side } = inverse
  const map = new Float32Array(side * side)
  const step = n / side
  const load = createLoader(plan)

  // The pattern: conjugate spectrum of the star images times the smoothing.
  const refX0 = Math.round(refX) - n / 2
  const refY0 = Math.round(refY) - n / 2
  for (const image of starImages(reference, width, height, refX, refY, blurPx, n)) {
    addImpulse(pattern, cut, n, image.x - refX0, image.y - refY0, image.weight)
  }
  let power = 0
  for (let kx = 0, o = 0; kx <= cut; kx++) {
    for (let ky = -cut; ky <= cut; ky++, o += 2) {
      const weight = filter((kx * kx + ky * ky) / (n * n))
      pattern[o]! *= weight
      pattern[o + 1]! *= -weight
      power += (kx === 0 ? 1 : 2) * (pattern[o]! * pattern[o]! + pattern[o + 1]! * pattern[o + 1]!)
    }
  }
  // White noise of the frame through the pattern: variance noise² × Σ|P|² / n².
  const noiseLevel = plan.noise * Math.sqrt(power) / n
  const radius = n / 2 - Math.max(4, n / 16)
  const apart = Math.max(3, 4 * blurPx)
  const refine = createNewton(cut, n)
  const found: Maximum = { x: 0, y: 0, value: 0 }

  return {
    reach: n / 2 + 1,
    register(luminance, expectedX, expectedY, out) {
      const x0 = Math.round(expectedX) - n / 2
      const y0 = Math.round(expectedY) - n / 2
      load(luminance, x0, y0, window)
      forward.forward(window, spectrum)
      multiply(spectrum, pattern, spectrum)
      inverse.inverse(spectrum, map)
      highest(map, side, step, 0, 0, radius, found)
      const runnerUp = secondHighest(map, side, step, found.x, found.y, apart, radius)
      refine(spectrum, step, found)
      const ratio = found.value > 0 ? Math.max(0, runnerUp) / found.value : 1
      const significance = noiseLevel > 0 ? found.value / noiseLevel : Infinity
      out.dx = refX0 - x0 - found.x
      out.dy = refY0 - y0 - found.y
      out.confidence = Math.max(0, Math.min(1, (1 - ratio) * Math.min(1, significance / (2 * LEAST_SIGNIFICANCE))))
      out.sure = ratio < RUNNER_UP && significance > LEAST_SIGNIFICANCE
      out.transfer = NaN
    },
  }
}

/** Adds the spectrum of a single bright point at (x, y). */
function addImpulse(out: Float64Array, cut: number, n: number, x: number, y: number, weight: number): void {
  for (let kx = 0, o = 0; kx <= cut; kx++) {
    for (let ky = -cut; ky <= cut; ky++, o += 2) {
      const angle = -2 * Math.PI * (kx * x + ky * y) / n
      out[o]! += weight * steadyCos(angle)
      out[o + 1]! += weight * steadySin(angle)
    }
  }
}
