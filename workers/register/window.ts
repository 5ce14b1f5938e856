/** Windows about a target, ready for a Fourier transform. */
import { taper } from '../score/follow'
import type { TargetForm } from '../score/types'

export interface WindowShape { width: number, height: number, windowPx: number, form: TargetForm }

/**
 * Cuts a window out of a frame, less its border level (stars) or its mean (extended), and tapers it.
 *
 * The tapers of frame and reference correlate as well, at zero shift, and pull every shift toward it (by 8 % on structure
 * of 6 px in a window of 64): a window must lie within half a pixel of where it belongs before its shift is final.
 */
export function createLoader(plan: WindowShape): (frame: Float32Array, x0: number, y0: number, out: Float32Array) => void {
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
