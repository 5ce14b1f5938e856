/** The shift of one frame against the reference; which way is the recipe's choice. */
import { extendedRegistrar } from './extended'
import { starRegistrar } from './star'
import type { FrameShift, RegisterPlan } from './types'

export interface Registrar {
  /** @param expectedX place of the target in this frame, px, as the scorer found it */
  register(luminance: Float32Array, expectedX: number, expectedY: number, out: FrameShift): void
  /** Rows that are looked at for a target expected at a row: this many above and below it; absent where it may be any. */
  readonly reach?: number
}

export const emptyShift = (): FrameShift => ({ dx: 0, dy: 0, confidence: 0, sure: false, transfer: NaN })

export function createRegistrar(plan: RegisterPlan): Registrar {
  if (plan.form === 'star' && plan.method === 'speckle') return speckleRegistrar(plan)
  if (plan.method === 'centroid') return centroidRegistrar(plan)
  return plan.form === 'star' ? starRegistrar(plan) : extendedRegistrar(plan)
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
      out.transfer = NaN
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
      out.transfer = NaN
    },
  }
}
