/**
 * The shift of one frame against the reference, by FFT cross-correlation in a window about the target.
 *
 * Stars: the reference is first reduced to its star images (places and strengths of its cores), and the frame,
 * smoothed a little, is correlated with those. Its maximum is the brightest speckle for a single star, and for a
 * double the one speckle that both components agree on: weighted shift-and-add (Christou, Hege, Freeman & Ribak
 * 1986, JOSA A 3, 204, from memory). The halo in a plain stack would pull the shift toward the centroid.
 * Extended targets: frame and reference are band-passed, so that neither shading nor grain decides.
 *
 * Sub-pixel: the correlation is a short Fourier sum; its maximum is found by Newton steps on that sum itself (the
 * limit of an upsampled DFT, Guizar-Sicairos, Thurman & Fienup 2008, Opt. Lett. 33, 156), so nothing pulls
 * toward whole pixels.
 */
import { steadyCos, steadyExp, steadySin } from '../../shared/steadymath'
import { taper } from '../score/follow'
import { createForward, createInverse, spectrumLength } from './fft2'
import { starImages } from './reference'
import type { FrameShift, RegisterPlan } from './types'

export interface Registrar {
  /** @param expectedX place of the target in this frame, px, as the scorer found it */
  register(luminance: Float32Array, expectedX: number, expectedY: number, out: FrameShift): void
}

export const emptyShift = (): FrameShift => ({ dx: 0, dy: 0, confidence: 0, sure: false })

/** A second candidate as strong as this share of the first makes a frame unsure. */
const RUNNER_UP = { star: 0.92, disc: 0.95, field: 0.9 }
/** The correlation's maximum must stand this far over the noise that white noise alone would give. */
const LEAST_SIGNIFICANCE = 5

export function createRegistrar(plan: RegisterPlan): Registrar {
  if (plan.form === 'star' && plan.method === 'speckle') return speckleRegistrar(plan)
  if (plan.method === 'centroid') return centroidRegistrar(plan)
  return correlationRegistrar(plan)
}

function correlationRegistrar(plan: RegisterPlan): Registrar {
  const { width, height, form, windowPx: n, reference, refX, refY } = plan
  const star = form === 'star'
  const cut = Math.min(n / 2 - 1, cutFor(plan))
  const forward = createForward(n, cut)
  const inverse = createInverse(n, cut)
  const length = spectrumLength(cut)
  const spectrum = new Float64Array(length)
  const pattern = new Float64Array(length)
  const window = new Float32Array(n * n)
  const side = inverse.side
  const map = new Float32Array(side * side)
  const step = n / side
  const loader = createLoader(plan)

  // The pattern: conjugate spectrum of the reference times the filter.
  const refX0 = Math.round(refX) - n / 2
  const refY0 = Math.round(refY) - n / 2
  if (star) {
    for (const image of starImages(reference, width, height, refX, refY, plan.blurPx, n)) {
      addImpulse(pattern, cut, n, image.x - refX0, image.y - refY0, image.weight)
    }
  }
  else {
    loader(reference, refX0, refY0, window)
    forward.forward(window, pattern)
  }
  let power = 0
  for (let kx = 0, o = 0; kx <= cut; kx++) {
    for (let ky = -cut; ky <= cut; ky++, o += 2) {
      const weight = filterAt(plan, (kx * kx + ky * ky) / (n * n))
      pattern[o]! *= weight
      pattern[o + 1]! *= -weight
      power += (kx === 0 ? 1 : 2) * (pattern[o]! * pattern[o]! + pattern[o + 1]! * pattern[o + 1]!)
    }
  }
  // White noise of the frame through the pattern: variance noise² × Σ|P|² / n².
  const noiseLevel = plan.noise * Math.sqrt(power) / n
  const limit = RUNNER_UP[form]
  const radius = n / 2 - Math.max(4, n / 16)
  const apart = Math.max(3, 4 * plan.blurPx)
  const refine = createNewton(cut, n)
  const found = { x: 0, y: 0, value: 0 }

  return {
    register(luminance, expectedX, expectedY, out) {
      const x0 = Math.round(expectedX) - n / 2
      const y0 = Math.round(expectedY) - n / 2
      loader(luminance, x0, y0, window)
      forward.forward(window, spectrum)
      for (let o = 0; o < length; o += 2) {
        const re = spectrum[o]!
        const im = spectrum[o + 1]!
        spectrum[o] = re * pattern[o]! - im * pattern[o + 1]!
        spectrum[o + 1] = re * pattern[o + 1]! + im * pattern[o]!
      }
      inverse.inverse(spectrum, map)
      let best = -Infinity
      let bestX = 0
      let bestY = 0
      for (let y = 0; y < side; y++) {
        const sy = y < side / 2 ? y : y - side
        for (let x = 0; x < side; x++) {
          const value = map[y * side + x]!
          if (value <= best) continue
          const sx = x < side / 2 ? x : x - side
          if (sx * step > radius || sx * step < -radius || sy * step > radius || sy * step < -radius) continue
          best = value
          bestX = sx
          bestY = sy
        }
      }
      found.x = bestX * step
      found.y = bestY * step
      found.value = best
      refine(spectrum, step, found)
      const runnerUp = secondMaximum(map, side, step, bestX, bestY, apart, radius)
      const ratio = found.value > 0 ? Math.max(0, runnerUp) / found.value : 1
      const significance = noiseLevel > 0 ? found.value / noiseLevel : Infinity
      out.dx = refX0 - x0 - found.x
      out.dy = refY0 - y0 - found.y
      out.confidence = Math.max(0, Math.min(1, (1 - ratio) * Math.min(1, significance / (2 * LEAST_SIGNIFICANCE))))
      out.sure = ratio < limit && significance > LEAST_SIGNIFICANCE
    },
  }

  function addImpulse(out: Float64Array, c: number, size: number, x: number, y: number, weight: number): void {
    for (let kx = 0, o = 0; kx <= c; kx++) {
      for (let ky = -c; ky <= c; ky++, o += 2) {
        const angle = -2 * Math.PI * (kx * x + ky * y) / size
        out[o]! += weight * steadyCos(angle)
        out[o + 1]! += weight * steadySin(angle)
      }
    }
  }
}

/** Frequency index above which the filter leaves less than a thousandth. */
function cutFor(plan: RegisterPlan): number {
  for (let k = 2; k < plan.windowPx / 2; k++) if (filterAt(plan, (k / plan.windowPx) ** 2) < 1e-3 && k > plan.windowPx / 8) return k
  return plan.windowPx / 2 - 1
}

/** Band of extended targets: sigmas (px) of the Gaussians that take away shading and grain. */
const BAND = { disc: { low: 6, high: 1.5 }, field: { low: 4, high: 1.5 } }

/** The filter at squared frequency f2 (cycles² per px²). */
function filterAt(plan: RegisterPlan, f2: number): number {
  const twoPi2 = 2 * Math.PI * Math.PI
  if (plan.form === 'star') return steadyExp(-twoPi2 * plan.blurPx * plan.blurPx * f2)
  const { low, high } = BAND[plan.form]
  const rise = 1 - steadyExp(-twoPi2 * low * low * f2)
  return rise * rise * steadyExp(-2 * twoPi2 * high * high * f2)
}

/** Cuts a window out of a frame, less its border level (stars) or its mean (extended), and tapers it. */
function createLoader(plan: RegisterPlan): (frame: Float32Array, x0: number, y0: number, out: Float32Array) => void {
  const { width, height, windowPx: n, form } = plan
  const weights = new Map<number, Float64Array>()
  const weightFor = (length: number): Float64Array => {
    let w = weights.get(length)
    if (!w) {
      w = taper(length, form === 'star' ? 0.06 : 0.12)
      weights.set(length, w)
    }
    return w
  }
  return (frame, x0, y0, out) => {
    const left = Math.max(0, x0)
    const right = Math.min(width, x0 + n)
    const top = Math.max(0, y0)
    const bottom = Math.min(height, y0 + n)
    const columns = right - left
    const rows = bottom - top
    if (columns < 8 || rows < 8) {
      out.fill(0)
      return
    }
    let level = 0
    if (form === 'star') {
      for (let x = left; x < right; x++) level += frame[top * width + x]! + frame[(bottom - 1) * width + x]!
      for (let y = top; y < bottom; y++) level += frame[y * width + left]! + frame[y * width + right - 1]!
      level /= 2 * (columns + rows)
    }
    else {
      for (let y = top; y < bottom; y++) for (let i = y * width + left; i < y * width + right; i++) level += frame[i]!
      level /= columns * rows
    }
    if (columns < n || rows < n) out.fill(0)
    const wx = weightFor(columns)
    const wy = weightFor(rows)
    for (let y = top; y < bottom; y++) {
      const to = (y - y0) * n + left - x0
      const from = y * width + left
      const w = wy[y - top]!
      for (let x = 0; x < columns; x++) out[to + x] = (frame[from + x]! - level) * w * wx[x]!
    }
  }
}

/** Highest local maximum of the map that is at least `apart` px from the best and within the search radius. */
function secondMaximum(map: Float32Array, side: number, step: number, bestX: number, bestY: number, apart: number, radius: number): number {
  let second = -Infinity
  const limit = apart * apart
  const mask = side - 1
  for (let y = 0; y < side; y++) {
    const sy = y < side / 2 ? y : y - side
    if (sy * step > radius || sy * step < -radius) continue
    const row = y * side
    const up = ((y - 1) & mask) * side
    const down = ((y + 1) & mask) * side
    for (let x = 0; x < side; x++) {
      const value = map[row + x]!
      if (value <= second) continue
      const sx = x < side / 2 ? x : x - side
      if (sx * step > radius || sx * step < -radius) continue
      const ex = (sx - bestX) * step
      const ey = (sy - bestY) * step
      if (ex * ex + ey * ey < limit) continue
      const l = (x - 1) & mask
      const r = (x + 1) & mask
      if (value >= map[row + l]! && value >= map[row + r]! && value >= map[up + x]! && value >= map[down + x]!
        && value >= map[up + l]! && value >= map[up + r]! && value >= map[down + l]! && value >= map[down + r]!) second = value
    }
  }
  return second
}

/** Newton steps to the maximum of the Fourier sum, from a start within a map pixel of it. */
function createNewton(cut: number, n: number): (spectrum: Float64Array, step: number, at: { x: number, y: number, value: number }) => void {
  const cosY = new Float64Array(2 * cut + 1)
  const sinY = new Float64Array(2 * cut + 1)
  const omega = 2 * Math.PI / n
  const scale = 1 / (n * n)
  return (spectrum, step, at) => {
    const startX = at.x
    const startY = at.y
    let x = startX
    let y = startY
    for (let iteration = 0; iteration < 4; iteration++) {
      for (let ky = -cut; ky <= cut; ky++) {
        cosY[ky + cut] = steadyCos(omega * ky * y)
        sinY[ky + cut] = steadySin(omega * ky * y)
      }
      let value = 0
      let gx = 0
      let gy = 0
      let xx = 0
      let yy = 0
      let xy = 0
      for (let kx = 0, o = 0; kx <= cut; kx++) {
        // Column sums Σ S e^{iωky·y}, and with ky and ky² as weights.
        let re = 0
        let im = 0
        let re1 = 0
        let im1 = 0
        let re2 = 0
        for (let k = 0; k <= 2 * cut; k++, o += 2) {
          const a = spectrum[o]! * cosY[k]! - spectrum[o + 1]! * sinY[k]!
          const b = spectrum[o]! * sinY[k]! + spectrum[o + 1]! * cosY[k]!
          const ky = k - cut
          re += a
          im += b
          re1 += ky * a
          im1 += ky * b
          re2 += ky * ky * a
        }
        let im2 = 0
        const c = steadyCos(omega * kx * x)
        const s = steadySin(omega * kx * x)
        if (kx > 0) {
          // Σ ky² b is needed only to turn re2 by the phase of kx.
          for (let k = 0, p = o - 2 * (2 * cut + 1); k <= 2 * cut; k++, p += 2) {
            const ky = k - cut
            im2 += ky * ky * (spectrum[p]! * sinY[k]! + spectrum[p + 1]! * cosY[k]!)
          }
        }
        const both = kx === 0 ? 1 : 2
        const real = re * c - im * s
        const imaginary = re * s + im * c
        value += both * real
        gx -= both * kx * imaginary
        xx -= both * kx * kx * real
        gy -= both * (re1 * s + im1 * c)
        xy -= both * kx * (re1 * c - im1 * s)
        yy -= both * (re2 * c - im2 * s)
      }
      at.value = value * scale
      at.x = x
      at.y = y
      const determinant = xx * yy - xy * xy
      if (!(determinant > 0) || xx >= 0) return
      const sx = (xy * gy - yy * gx) / determinant / omega
      const sy = (xy * gx - xx * gy) / determinant / omega
      if (!(Math.abs(sx) < step) || !(Math.abs(sy) < step)) return
      x += sx
      y += sy
      if (Math.abs(x - startX) > step || Math.abs(y - startY) > step) return
      if (Math.abs(sx) < 1e-5 && Math.abs(sy) < 1e-5) {
        at.x = x
        at.y = y
        return
      }
    }
  }
}

/** Brightest smoothed point near the expected place; the reference's place is where the target lies in it. */
function speckleRegistrar(plan: RegisterPlan): Registrar {
  return {
    register(_luminance, expectedX, expectedY, out) {
      // The scorer's place of a star is its brightest smoothed point, sub-pixel.
      out.dx = plan.refX - expectedX
      out.dy = plan.refY - expectedY
      out.confidence = 1
      out.sure = true
    },
  }
}

/** Centroid of what stands over the border level, in a window about the expected place. */
function centroidRegistrar(plan: RegisterPlan): Registrar {
  const { width, height, windowPx: n, noise } = plan
  const place = { x: 0, y: 0, flux: 0 }
  const centroid = (frame: Float32Array, cx: number, cy: number): void => {
    const left = Math.max(0, Math.round(cx) - n / 2)
    const right = Math.min(width, Math.round(cx) + n / 2)
    const top = Math.max(0, Math.round(cy) - n / 2)
    const bottom = Math.min(height, Math.round(cy) + n / 2)
    let level = 0
    for (let x = left; x < right; x++) level += frame[top * width + x]! + frame[(bottom - 1) * width + x]!
    for (let y = top; y < bottom; y++) level += frame[y * width + left]! + frame[y * width + right - 1]!
    level /= 2 * (right - left + bottom - top)
    let sum = 0
    let sx = 0
    let sy = 0
    for (let y = top; y < bottom; y++) {
      for (let x = left; x < right; x++) {
        const v = frame[y * width + x]! - level
        if (v < 2 * noise) continue
        sum += v
        sx += v * x
        sy += v * y
      }
    }
    place.flux = sum
    place.x = sum > 0 ? sx / sum : cx
    place.y = sum > 0 ? sy / sum : cy
  }
  centroid(plan.reference, plan.refX, plan.refY)
  const homeX = place.x
  const homeY = place.y
  return {
    register(luminance, expectedX, expectedY, out) {
      centroid(luminance, expectedX, expectedY)
      // Once more about the centroid, so that the window does not depend on a speckle.
      centroid(luminance, place.x, place.y)
      out.dx = homeX - place.x
      out.dy = homeY - place.y
      out.confidence = place.flux > 0 ? 1 : 0
      out.sure = place.flux > 0
    },
  }
}
