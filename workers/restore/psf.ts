/** Transfers of what blurs a stack: from a star itself, or from a description. */
import { lambdaOverDPx, type OpticsLike } from '../../shared/optics'
import { steadyCos, steadyExp, steadySin } from '../../shared/steadymath'
import type { RadialCurve } from './convolve'

/** Angle whose cosine is x, −1 ≤ x ≤ 1, by halving: the same bits in every engine. */
function arcCos(x: number): number {
  let low = 0
  let high = Math.PI
  for (let i = 0; i < 52; i++) {
    const middle = 0.5 * (low + high)
    if (steadyCos(middle) > x) low = middle
    else high = middle
  }
  return 0.5 * (low + high)
}

/** Area that two circles of radii a ≥ b share when their centres are d apart. */
function overlap(a: number, b: number, d: number): number {
  if (d >= a + b) return 0
  if (d <= a - b) return Math.PI * b * b
  const p = arcCos((d * d + a * a - b * b) / (2 * d * a))
  const q = arcCos((d * d + b * b - a * a) / (2 * d * b))
  return a * a * (p - steadySin(p) * steadyCos(p)) + b * b * (q - steadySin(q) * steadyCos(q))
}

/**
 * Transfer of a perfect telescope at u = frequency / (D/λ): the autocorrelation of its ring-shaped aperture (Goodman, Introduction
 * to Fourier Optics, ch. 6; O'Neill 1956, J. Opt. Soc. Am. 46, 285, for the ring), as areas that circles share.
 */
export function diffractionTransfer(u: number, obstruction: number): number {
  if (u >= 1) return 0
  const e = Math.max(0, obstruction)
  const whole = Math.PI * (1 - e * e)
  // Radii 1 and e, centres 2u apart.
  return (overlap(1, 1, 2 * u) - 2 * overlap(1, e, 2 * u) + overlap(e, e, 2 * u)) / whole
}

/** Bessel function J0 by Bessel's integral and the trapezium rule, exact to rounding. */
export function besselJ0(x: number): number {
  const n = 32 + 2 * Math.ceil(Math.abs(x))
  let sum = 0
  for (let k = 0; k < n; k++) sum += steadyCos(x * steadySin(Math.PI * k / n))
  return sum / n
}

const RAYS = 48
/** Step of a radial profile, px. */
export const PROFILE_STEP = 0.5

/**
 * Median brightness over the background on circles about (x, y), each PROFILE_STEP px to `reach`: what a companion covers on less
 * than half of a circle does not count. Bilinear; below 0 counts as 0.
 */
export function radialProfile(image: Float32Array, width: number, height: number, x: number, y: number, background: number, reach: number): Float64Array {
  const out = new Float64Array(Math.floor(reach / PROFILE_STEP) + 1)
  const values = new Float64Array(RAYS)
  for (let i = 0; i < out.length; i++) {
    for (let k = 0; k < RAYS; k++) {
      const angle = 2 * Math.PI * k / RAYS
      values[k] = at(image, width, height, x + i * PROFILE_STEP * steadyCos(angle), y + i * PROFILE_STEP * steadySin(angle)) - background
    }
    const sorted = values.slice().sort()
    out[i] = Math.max(0, 0.5 * (sorted[RAYS / 2 - 1]! + sorted[RAYS / 2]!))
  }
  return out
}

function at(image: Float32Array, width: number, height: number, x: number, y: number): number {
  const ix = Math.min(width - 2, Math.max(0, Math.floor(x)))
  const iy = Math.min(height - 2, Math.max(0, Math.floor(y)))
  const fx = Math.min(1, Math.max(0, x - ix))
  const fy = Math.min(1, Math.max(0, y - iy))
  const o = iy * width + ix
  return (1 - fy) * ((1 - fx) * image[o]! + fx * image[o + 1]!) + fy * ((1 - fx) * image[o + width]! + fx * image[o + width + 1]!)
}

/** Frequencies of a stored transfer, cycles per px. */
export const TRANSFER_STEP = 1 / 128

/** The transfer of a round star image from its profile: its Hankel transform over its light, from 0 to the corner frequency. */
export function profileTransfer(profile: Float64Array): RadialCurve {
  const values: number[] = []
  for (let f = 0; f <= 0.7072; f += TRANSFER_STEP) {
    let sum = 0
    let all = 0
    profile.forEach((value, i) => {
      const r = Math.max(i, 0.25) * PROFILE_STEP
      sum += value * r * besselJ0(2 * Math.PI * f * i * PROFILE_STEP)
      all += value * r
    })
    values.push(all > 0 ? sum / all : 1)
  }
  return { step: TRANSFER_STEP, values }
}

/** Below this transfer of the telescope itself nothing is divided by it. */
const LEAST = 0.08

/**
 * What the air adds to a star's measured transfer: that over the telescope's own and the pixel's. Beyond where the telescope passes
 * hardly anything the last sound value stays. Without optics the whole transfer is blamed on the air.
 */
export function againstTelescope(measured: RadialCurve, optics: OpticsLike | null): RadialCurve {
  if (!optics) return measured
  const lambda = lambdaOverDPx(optics)
  let last = 1
  const values = measured.values.map((value, i) => {
    const f = i * measured.step
    const own = diffractionTransfer(f * lambda, optics.obstruction)
    const pixel = f > 0 ? steadySin(Math.PI * f) / (Math.PI * f) : 1
    if (own * pixel >= LEAST) last = Math.min(1, Math.max(0.01, value / (own * pixel)))
    return last
  })
  return { step: measured.step, values }
}

/** A core that the air left alone, of `core` of the light, and a Gaussian halo of a width at half maximum in px. */
export function coreAndHalo(core: number, haloPx: number): (f: number) => number {
  const sigma = haloPx / 2.354820045
  return f => core + (1 - core) * steadyExp(-2 * Math.PI * Math.PI * sigma * sigma * f * f)
}
