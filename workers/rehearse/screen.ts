/**
 * Phase screens of turbulent air, in frozen flow.
 *
 * A periodic screen made by one transform holds the spatial frequencies of its grid; the lower ones, which carry most
 * of the tilt, are plane waves on a grid refined threefold again and again around zero (Lane, Glindemann & Dainty 1992,
 * from memory of the title), evaluated as a quadratic around the pupil's middle: their periods are many apertures long.
 * Amplitudes of coarse cells preserve the cell's integral of f² times the spectrum, that is, its wavefront slope.
 *
 * The pupil is carried over the periodic screen on a slanted line, so that it does not meet its own track again for
 * many lengths of the screen. It moves in whole grid steps: interpolation would smooth the finest phase away.
 */
import { createSquareTransform } from './fft2'
import { createRandom, type Random } from './random'

/** Spectrum of the phase: 0.0228956 r0^(−5/3) (f² + 1/L0²)^(−11/6), f in cycles per length (Noll 1976, exact constant). */
export const SPECTRUM_CONSTANT = 0.0228956
const LEVELS = 7

export interface ScreenOptions {
  seed: number
  /** Grid points on a side, a power of two, and their distance in units of the aperture. */
  size: number
  step: number
  /** Outer scale in units of the aperture; null is infinite. */
  outerScale: number | null
  /** Independent screens wanted. */
  count: number
}

/** Phase in radians for D/r0 = 1 (multiply by (D/r0)^(5/6)). */
export interface Screen {
  readonly size: number
  readonly phase: Float32Array
  /** Low frequencies: frequency (cycles per aperture) and the cosine's and sine's amplitude. */
  readonly waves: readonly { fx: number, fy: number, cosine: number, sine: number }[]
}

/** Variance of a spectral cell, such that variance × f² of its middle is the cell's integral of f² × spectrum. */
function cellVariance(fx: number, fy: number, side: number, outer: number): number {
  const parts = 8
  let sum = 0
  for (let i = 0; i < parts; i++) {
    for (let j = 0; j < parts; j++) {
      const x = fx + side * ((i + 0.5) / parts - 0.5)
      const y = fy + side * ((j + 0.5) / parts - 0.5)
      const squared = x * x + y * y
      sum += squared * (squared + outer) ** (-11 / 6)
    }
  }
  return SPECTRUM_CONSTANT * sum * (side / parts) ** 2 / (fx * fx + fy * fy)
}

function lowWaves(random: Random, side: number, outer: number): Screen['waves'] {
  const waves: { fx: number, fy: number, cosine: number, sine: number }[] = []
  for (let level = 1, cell = side / 3; level <= LEVELS; level++, cell /= 3) {
    for (let i = -1; i <= 1; i++) {
      for (let j = -1; j <= 1; j++) {
        if (i === 0 && j === 0) continue
        const sigma = Math.sqrt(cellVariance(i * cell, j * cell, cell, outer))
        waves.push({ fx: i * cell, fy: j * cell, cosine: sigma * random.normal(), sine: sigma * random.normal() })
      }
    }
  }
  return waves
}

export function createScreens({ seed, size, step, outerScale, count }: ScreenOptions): Screen[] {
  const outer = outerScale === null ? 0 : 1 / (outerScale * outerScale)
  const side = 1 / (size * step)
  const screens: Screen[] = []
  const transform = createSquareTransform(size)
  const amplitude = new Float64Array((size / 2 + 1) * (size / 2 + 1))
  for (let ky = 0; ky <= size / 2; ky++) {
    for (let kx = 0; kx <= size / 2; kx++) {
      const fx = kx * side
      const fy = ky * side
      const at = ky * (size / 2 + 1) + kx
      if (kx === 0 && ky === 0) amplitude[at] = 0
      else if (kx + ky <= 8) amplitude[at] = Math.sqrt(cellVariance(fx, fy, side, outer))
      else amplitude[at] = Math.sqrt(SPECTRUM_CONSTANT) * (fx * fx + fy * fy + outer) ** (-11 / 12) * side
    }
  }
  const data = new Float64Array(2 * size * size)
  for (let pair = 0; 2 * pair < count; pair++) {
    const random = createRandom(seed, 1, pair)
    for (let ky = 0, at = 0; ky < size; ky++) {
      const row = Math.min(ky, size - ky) * (size / 2 + 1)
      for (let kx = 0; kx < size; kx++, at += 2) {
        const sigma = amplitude[row + Math.min(kx, size - kx)]!
        data[at] = sigma * random.normal()
        data[at + 1] = sigma * random.normal()
      }
    }
    transform.forward(data)
    for (let part = 0; part < 2 && screens.length < count; part++) {
      const phase = new Float32Array(size * size)
      for (let i = 0; i < phase.length; i++) phase[i] = data[2 * i + part]!
      screens.push({ size, phase, waves: lowWaves(random, side, outer) })
    }
  }
  return screens
}

/** Slope and curvature of the low waves at a place (apertures): φ ≈ x·u + y·v + xx·u² + xy·u·v + yy·v² with u, v from there. */
export interface LowPhase { x: number, y: number, xx: number, xy: number, yy: number }

export function lowPhaseAt(screen: Screen, x: number, y: number, gain: number, out: LowPhase): void {
  for (const wave of screen.waves) {
    const kx = 2 * Math.PI * wave.fx
    const ky = 2 * Math.PI * wave.fy
    const c = Math.cos(kx * x + ky * y)
    const s = Math.sin(kx * x + ky * y)
    const value = gain * (wave.cosine * c + wave.sine * s)
    const slope = gain * (wave.sine * c - wave.cosine * s)
    out.x += kx * slope
    out.y += ky * slope
    out.xx -= 0.5 * kx * kx * value
    out.xy -= kx * ky * value
    out.yy -= 0.5 * ky * ky * value
  }
}
