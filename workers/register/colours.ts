/**
 * Colour planes laid on each other. Air bends blue more than red (and lenses do the same), so that the planes of one
 * exposure lie apart along the vertical; the shift is found on a stack, where noise hardly counts, and the planes of
 * every stack are moved by it once, with a resampling that keeps what is fine.
 */
import type { ColourShifts } from '../../shared/schemas/run'
import { steadyExp, steadySin } from '../../shared/steadymath'
import { createForward, createInverse, multiply, spectrumLength } from './fft2'
import { createNewton, highest, type Maximum } from './maximum'
import { createLoader } from './window'

type PlaneShift = NonNullable<ColourShifts['red']>

/** Sigmas (px) of the Gaussians that take away shading and grain; finer detail counts less in interpolated mosaics. */
const LOW = 6
const HIGH = 1.2
/** Planes of one exposure are never farther apart than this, px. */
const FARTHEST = 12
/** Least correlation (over what the two planes have with themselves) that makes a shift sure. */
const LEAST_CORRELATION = 0.4
const ROUNDS = 4
/** Half the number of taps of the resampling. */
const LOBES = 6

/** @param samples R, G, B planes of height × width each; (x, y) is the target's place, px */
export function colourShifts(samples: Float32Array, width: number, height: number, x: number, y: number, windowPx: number, form: 'star' | 'disc' | 'field'): ColourShifts {
  const size = width * height
  const plane = (k: number) => samples.subarray(k * size, (k + 1) * size)
  const find = planeFinder(plane(1), width, height, x, y, windowPx, form)
  return { red: find(plane(0)), blue: find(plane(2)) }
}

function planeFinder(green: Float32Array, width: number, height: number, x: number, y: number, n: number, form: 'star' | 'disc' | 'field'): (plane: Float32Array) => PlaneShift | null {
  const cut = n / 2 - 1
  const forward = createForward(n, cut)
  const inverse = createInverse(n, cut)
  const refine = createNewton(cut, n)
  const load = createLoader({ width, height, windowPx: n, form })
  const window = new Float32Array(n * n)
  const pattern = new Float64Array(spectrumLength(cut))
  const spectrum = new Float64Array(spectrumLength(cut))
  const map = new Float32Array(inverse.side ** 2)
  const weights = new Float64Array(pattern.length / 2)
  const x0 = Math.round(x) - n / 2
  const y0 = Math.round(y) - n / 2
  for (let kx = 0, i = 0; kx <= cut; kx++) {
    for (let ky = -cut; ky <= cut; ky++, i++) {
      const f2 = (kx * kx + ky * ky) / (n * n)
      const rise = 1 - steadyExp(-2 * Math.PI * Math.PI * LOW * LOW * f2)
      weights[i] = rise * rise * steadyExp(-4 * Math.PI * Math.PI * HIGH * HIGH * f2)
    }
  }
  const power = (values: Float64Array): number => {
    let sum = 0
    for (let kx = 0, i = 0; kx <= cut; kx++) for (let ky = -cut; ky <= cut; ky++, i++) sum += (kx === 0 ? 1 : 2) * weights[i]! * (values[2 * i]! ** 2 + values[2 * i + 1]! ** 2)
    return sum
  }
  load(green, x0, y0, window)
  forward.forward(window, pattern)
  const own = power(pattern)
  for (let i = 0; i < weights.length; i++) {
    pattern[2 * i]! *= weights[i]!
    pattern[2 * i + 1]! *= -weights[i]!
  }
  const found: Maximum = { x: 0, y: 0, value: 0 }
  return (plane) => {
    const moved = new Float32Array(plane.length)
    let dx = 0
    let dy = 0
    // The window's taper pulls toward zero shift: what is left is looked for on the moved plane, until nothing is.
    for (let round = 0; round < ROUNDS; round++) {
      shiftPlane(plane, width, height, dx, dy, moved)
      load(moved, x0, y0, window)
      forward.forward(window, spectrum)
      const others = power(spectrum)
      multiply(spectrum, pattern, spectrum)
      inverse.inverse(spectrum, map)
      highest(map, inverse.side, n / inverse.side, 0, 0, FARTHEST, found)
      refine(spectrum, n / inverse.side, found)
      const correlation = found.value * n * n / Math.sqrt(own * others)
      if (!(correlation > LEAST_CORRELATION)) return null
      dx -= found.x
      dy -= found.y
      if (Math.abs(dx) > FARTHEST || Math.abs(dy) > FARTHEST) return null
      if (Math.abs(found.x) < 0.005 && Math.abs(found.y) < 0.005) break
    }
    return { dx, dy }
  }
}

/** Weights of a sinc under a sinc of LOBES (Lanczos) for reading at fraction t, summing to 1. */
function sincTaps(t: number): Float64Array {
  const taps = new Float64Array(2 * LOBES)
  let sum = 0
  for (let k = 0; k < taps.length; k++) {
    const d = Math.PI * (k - LOBES + 1 - t)
    taps[k] = Math.abs(d) < 1e-9 ? 1 : steadySin(d) / d * steadySin(d / LOBES) / (d / LOBES)
    sum += taps[k]!
  }
  return taps.map(value => value / sum)
}

/** out(X, Y) = plane(X − dx, Y − dy) by a windowed sinc of 12 taps on each axis; beyond the edges the last sample repeats. */
export function shiftPlane(plane: Float32Array, width: number, height: number, dx: number, dy: number, out: Float32Array): void {
  const wholeX = Math.floor(-dx)
  const wholeY = Math.floor(-dy)
  const across = sincTaps(-dx - wholeX)
  const down = sincTaps(-dy - wholeY)
  const middle = new Float32Array(plane.length)
  for (let y = 0; y < height; y++) {
    const row = y * width
    for (let x = 0; x < width; x++) {
      let sum = 0
      const first = x + wholeX - LOBES + 1
      for (let k = 0; k < across.length; k++) sum += across[k]! * plane[row + Math.min(width - 1, Math.max(0, first + k))]!
      middle[row + x] = sum
    }
  }
  const line = new Float64Array(width)
  for (let y = 0; y < height; y++) {
    line.fill(0)
    for (let k = 0; k < down.length; k++) {
      const row = Math.min(height - 1, Math.max(0, y + wholeY - LOBES + 1 + k)) * width
      const weight = down[k]!
      for (let x = 0; x < width; x++) line[x]! += weight * middle[row + x]!
    }
    out.set(line, y * width)
  }
}

/** Moves red and blue onto green, in place. `grid`: pixels of this image per pixel of the frames. */
export function alignColours(samples: Float32Array, width: number, height: number, { red, blue }: ColourShifts, grid = 1): void {
  const size = width * height
  for (const [plane, shift] of [[0, red], [2, blue]] as const) {
    if (!shift || (shift.dx === 0 && shift.dy === 0)) continue
    const one = samples.subarray(plane * size, (plane + 1) * size)
    shiftPlane(one.slice(), width, height, shift.dx * grid, shift.dy * grid, one)
  }
}
