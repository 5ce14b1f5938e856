/** Filters of an image that depend on frequency alone, by Fourier transforms of padded squares. */
import { createForward, createInverse, spectrumLength } from '../register/fft2'

/** A real transfer by frequency: values at 0, step, 2 step … cycles per px, linear between, the last one beyond. */
export interface RadialCurve { step: number, values: readonly number[] }

export function curveAt({ step, values }: RadialCurve, f: number): number {
  const at = f / step
  const k = Math.floor(at)
  if (k >= values.length - 1) return values[values.length - 1] ?? 0
  return values[k]! + (at - k) * (values[k + 1]! - values[k]!)
}

export interface Convolver { n: number, apply(window: Float32Array, out: Float32Array): void }

/** Filters n × n windows (n a power of two), cyclic at the edges. */
export function createConvolver(n: number, curve: RadialCurve): Convolver {
  const cut = n / 2 - 1
  const forward = createForward(n, cut)
  const inverse = createInverse(n, cut)
  const spectrum = new Float64Array(spectrumLength(cut))
  const table = new Float32Array((cut + 1) * (2 * cut + 1))
  for (let kx = 0, o = 0; kx <= cut; kx++) for (let ky = -cut; ky <= cut; ky++) table[o++] = curveAt(curve, Math.sqrt(kx * kx + ky * ky) / n)
  return {
    n,
    apply(window, out) {
      forward.forward(window, spectrum)
      for (let o = 0; o < table.length; o++) {
        spectrum[2 * o]! *= table[o]!
        spectrum[2 * o + 1]! *= table[o]!
      }
      inverse.inverse(spectrum, out)
    },
  }
}

/** Lets other work in and throws when nobody waits any more. */
export type Pause = () => Promise<void>

/** Least padding beside a tile and overlap of tiles, px. */
const PAD = 48
const LARGEST = 1024

/** Works on padded squares: what is in `window` goes in, the result replaces it. */
export type SquareWork = (window: Float32Array, n: number) => Promise<void>

/** Side of the squares that an image of this size is worked on in. */
export function squareSide(width: number, height: number): number {
  let n = 32
  while (n < Math.max(width, height) + PAD && n < LARGEST) n *= 2
  return n
}

/**
 * Runs work over an image plane: in one padded square where it fits into 1024 px, else in squares that overlap and are faded into
 * each other, so that memory is bounded and no seam shows. Around each tile the image is mirrored, and the mirrored ends are
 * faded into each other across the padding, so that the cyclic filter meets no step.
 */
export async function inSquares(image: Float32Array, width: number, height: number, work: SquareWork, pause: Pause): Promise<Float32Array> {
  const n = squareSide(width, height)
  const side = n - PAD
  const xs = starts(width, side)
  const ys = starts(height, side)
  const out = new Float32Array(image.length)
  const weights = xs.length * ys.length > 1 ? new Float32Array(image.length) : null
  const window = new Float32Array(n * n)
  for (const y0 of ys) {
    for (const x0 of xs) {
      const w = Math.min(side, width - x0)
      const h = Math.min(side, height - y0)
      fill(image, width, height, x0, y0, w, h, window, n)
      await work(window, n)
      await pause()
      for (let y = 0; y < h; y++) {
        const fadeY = weights ? fade(y, h, y0 > 0, y0 + h < height) : 1
        for (let x = 0; x < w; x++) {
          const at = (y0 + y) * width + x0 + x
          const weight = weights ? fadeY * fade(x, w, x0 > 0, x0 + w < width) : 1
          out[at]! += weight * window[y * n + x]!
          if (weights) weights[at]! += weight
        }
      }
    }
  }
  if (weights) for (let i = 0; i < out.length; i++) out[i]! /= weights[i]!
  return out
}

/** Where tiles begin: they overlap by three paddings, the outer two thirds of which are faded. */
function starts(length: number, side: number): number[] {
  if (length <= side) return [0]
  const tiles = Math.ceil((length - 3 * PAD) / (side - 3 * PAD))
  return Array.from({ length: tiles }, (_, k) => Math.round(k * (length - side) / Math.max(1, tiles - 1)))
}

/** 0 in the first PAD px at an inner edge, rising to 1 over the next PAD. */
function fade(at: number, size: number, low: boolean, high: boolean): number {
  const ramp = (d: number) => Math.min(1, Math.max(1e-6, (d - PAD / 2) / PAD))
  return (low ? ramp(at) : 1) * (high ? ramp(size - 1 - at) : 1)
}

/** The tile in the window's corner; what surrounds it in the image, mirrored at the image's edges, follows, faded into what precedes it. */
function fill(image: Float32Array, width: number, height: number, x0: number, y0: number, w: number, h: number, window: Float32Array, n: number): void {
  const ax = axis(x0, w, width, n)
  const ay = axis(y0, h, height, n)
  for (let y = 0; y < n; y++) {
    const r0 = ay.after[y]! * width
    const r1 = ay.before[y]! * width
    const ty = ay.blend[y]!
    for (let x = 0; x < n; x++) {
      const c0 = ax.after[x]!
      const c1 = ax.before[x]!
      const tx = ax.blend[x]!
      let value = image[r0 + c0]!
      if (tx > 0) value += tx * (image[r0 + c1]! - value)
      if (ty > 0) {
        let other = image[r1 + c0]!
        if (tx > 0) other += tx * (image[r1 + c1]! - other)
        value += ty * (other - value)
      }
      window[y * n + x] = value
    }
  }
}

function axis(start: number, size: number, length: number, n: number): { after: Int32Array, before: Int32Array, blend: Float32Array } {
  const mirror = (i: number) => {
    const period = Math.max(1, 2 * (length - 1))
    const at = ((i % period) + period) % period
    return at < length ? at : period - at
  }
  const gap = n - size
  return {
    after: Int32Array.from({ length: n }, (_, i) => mirror(start + i)),
    before: Int32Array.from({ length: n }, (_, i) => mirror(start + i - n)),
    blend: Float32Array.from({ length: n }, (_, i) => (i < size ? 0 : (i - size + 1) / (gap + 1))),
  }
}
