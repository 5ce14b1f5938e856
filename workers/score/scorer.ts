/**
 * Scores of one frame. Every frame is judged by itself and the plan; nothing runs on from frame to frame, so that
 * any order and any number of workers give the same bits. Working memory is made once.
 *
 * Both scores are divided by the target's own brightness, measured where the target is (a cloud dims core and
 * whole alike; dividing by the frame's total would let a field that drifts rank the frames). The Laplacian's
 * noise floor is subtracted first, or dim frames would look sharp.
 */
import { blurNoiseGain } from './blur'
import { createBlocks, fillBlocks, quantileInPlace } from './blocks'
import { createFollower } from './follow'
import { laplacianVariance, quadraticPeak } from './measures'
import { createSmoother, fullSmoother } from './smooth'
import type { FrameScore, ScorePlan } from './types'

export interface Scorer {
  /**
   * @param luminance width × height, as prepareLuminance makes it
   * @param clippedSamples what prepareLuminance returned
   */
  score(luminance: Float32Array, clippedSamples: number, out: FrameScore): void
}

export const emptyScore = (): FrameScore => ({ laplacian: 0, peak: 0, flux: 0, background: 0, x: 0, y: 0, saturated: false, empty: false, outOfField: false })

/** Deviations of the smoothed noise that a star's brightest point must exceed. */
const LEAST_STAR = 6
/** Blocks that tell the background of a compact target. */
const BACKGROUND_BLOCKS = 4096

export function createScorer(plan: ScorePlan): Scorer {
  return plan.form === 'field' ? fieldScorer(plan) : compactScorer(plan)
}

/** Whole-pixel window of `side` about a place, cut to the frame. */
interface Crop { x0: number, y0: number, columns: number, rows: number }
function cropAbout(x: number, y: number, sideX: number, sideY: number, width: number, height: number, out: Crop): void {
  const left = Math.round(x) - (sideX >> 1)
  const top = Math.round(y) - (sideY >> 1)
  const x0 = Math.min(Math.max(0, left), Math.max(0, width - 3))
  const y0 = Math.min(Math.max(0, top), Math.max(0, height - 3))
  out.x0 = x0
  out.y0 = y0
  out.columns = Math.max(Math.min(3, width), Math.min(width, left + sideX) - x0)
  out.rows = Math.max(Math.min(3, height), Math.min(height, top + sideY) - y0)
}

function windowSum(frame: Float32Array, width: number, crop: Crop): number {
  let sum = 0
  for (let y = crop.y0; y < crop.y0 + crop.rows; y++) {
    const row = y * width
    for (let i = row + crop.x0; i < row + crop.x0 + crop.columns; i++) sum += frame[i]!
  }
  return sum
}

/** Stars and discs: found as the brightest region on a darker sky. */
function compactScorer(plan: ScorePlan): Scorer {
  const { width, height, form, blurPx, noise } = plan
  const side = Math.min(plan.windowPx, 2 * Math.max(width, height))
  const blocks = createBlocks(width, height)
  const { columns, rows, means } = blocks
  const beside = new Float32Array(means.length)
  // Some thousand blocks give the background as well as all do.
  const every = Math.max(1, Math.floor(means.length / BACKGROUND_BLOCKS))
  const across3 = new Float64Array(means.length)
  // A star's peak is taken at full sampling whatever the smoothing.
  const smoother = form === 'disc' ? createSmoother(blurPx, side, side) : fullSmoother(blurPx, side)
  const { bin, out: smooth } = smoother
  const floor = noise * noise * smoother.laplacianNoise
  const least = LEAST_STAR * noise * blurNoiseGain(blurPx)
  const leastBlock = LEAST_STAR * noise / blocks.side
  const crop: Crop = { x0: 0, y0: 0, columns: 0, rows: 0 }
  const peak = { x: 0, y: 0, value: 0 }
  const edge = Math.max(2, Math.ceil(2 * blurPx))

  return {
    score(luminance, clippedSamples, out) {
      fillBlocks(luminance, width, blocks)
      const best = brightest(means, columns, rows, across3)
      let x = ((best % columns) + 0.5) * blocks.side - 0.5
      let y = (Math.floor(best / columns) + 0.5) * blocks.side - 0.5
      // Background: median of blocks beside the window, or the lower quarter where the window fills the frame.
      let n = 0
      for (let r = 0; r < rows; r++) {
        const apart = Math.abs((r + 0.5) * blocks.side - 0.5 - y) > 0.5 * side
        for (let c = r % every; c < columns; c += every) {
          if (apart || Math.abs((c + 0.5) * blocks.side - 0.5 - x) > 0.5 * side) beside[n++] = means[r * columns + c]!
        }
      }
      let share = 0.5
      if (n < 40) {
        n = means.length
        beside.set(means)
        share = 0.2
      }
      const background = quantileInPlace(beside, n, share)

      if (form === 'disc') {
        // Centroid of everything brighter than a third of the way to the bright part.
        beside.set(means)
        const bright = quantileInPlace(beside, means.length, 0.99)
        const threshold = background + 0.33 * (bright - background)
        let sum = 0
        let sx = 0
        let sy = 0
        for (let r = 0; r < rows; r++) {
          for (let c = 0; c < columns; c++) {
            const v = means[r * columns + c]! - threshold
            if (v <= 0) continue
            sum += v
            sx += v * c
            sy += v * r
          }
        }
        if (sum > 0) {
          x = (sx / sum + 0.5) * blocks.side - 0.5
          y = (sy / sum + 0.5) * blocks.side - 0.5
        }
        out.empty = bright - background < leastBlock
        out.outOfField = touchesEdge(means, columns, rows, threshold)
      }

      cropAbout(x, y, side, side, width, height, crop)
      smoother.smooth(luminance, width, height, crop.x0, crop.y0, crop.columns, crop.rows)
      const across = Math.floor(crop.columns / bin)
      const down = Math.floor(crop.rows / bin)
      quadraticPeak(smooth, across, down, peak)
      const flux = windowSum(luminance, width, crop) - background * crop.columns * crop.rows
      const height0 = peak.value - background
      if (form === 'star') {
        x = crop.x0 + peak.x
        y = crop.y0 + peak.y
        out.empty = height0 < least || flux <= 0
        out.outOfField = x < edge || y < edge || x > width - 1 - edge || y > height - 1 - edge
      }
      const safe = flux > 0 ? flux : Infinity
      const variance = laplacianVariance(smooth, across, down) - floor
      out.laplacian = variance * ((across - 2) * (down - 2)) / (safe * safe)
      out.peak = height0 / safe
      out.flux = flux
      out.background = background
      out.x = x
      out.y = y
      out.saturated = clippedSamples >= plan.saturatedSamples
    },
  }
}

/**
 * The block whose 3 × 3 surroundings are brightest, the first of equals. Beyond the edge lies sky, as far as we know: no bonus for
 * the border.
 * @param sums working memory, one value a block
 */
function brightest(means: Float32Array, columns: number, rows: number, sums: Float64Array): number {
  for (let r = 0; r < rows; r++) {
    const row = r * columns
    sums[row] = means[row]! + (columns > 1 ? means[row + 1]! : 0)
    for (let i = row + 1; i < row + columns - 1; i++) sums[i] = means[i - 1]! + means[i]! + means[i + 1]!
    if (columns > 1) sums[row + columns - 1] = means[row + columns - 2]! + means[row + columns - 1]!
  }
  let best = 0
  let bestSum = -Infinity
  for (let r = 0; r < rows; r++) {
    const up = r > 0 ? -columns : 0
    const down = r < rows - 1 ? columns : 0
    for (let i = r * columns; i < (r + 1) * columns; i++) {
      const sum = (up === 0 ? 0 : sums[i + up]!) + sums[i]! + (down === 0 ? 0 : sums[i + down]!)
      if (sum > bestSum) { bestSum = sum; best = i }
    }
  }
  return best
}

/** True where more than a tenth of some edge of the block image lies over the threshold. */
function touchesEdge(means: Float32Array, columns: number, rows: number, threshold: number): boolean {
  let left = 0
  let right = 0
  let top = 0
  let bottom = 0
  for (let r = 0; r < rows; r++) {
    if (means[r * columns]! > threshold) left++
    if (means[r * columns + columns - 1]! > threshold) right++
  }
  for (let c = 0; c < columns; c++) {
    if (means[c]! > threshold) top++
    if (means[(rows - 1) * columns + c]! > threshold) bottom++
  }
  return Math.max(left, right) > 0.1 * rows || Math.max(top, bottom) > 0.1 * columns
}

/** Targets that fill the field: judged in the same patch of the target, found by the coarse search. */
function fieldScorer(plan: ScorePlan): Scorer {
  const { width, height, blurPx, noise, centre } = plan
  const sideX = Math.max(3, Math.round(0.8 * width))
  const sideY = Math.max(3, Math.round(0.8 * height))
  const smoother = createSmoother(blurPx, sideX, sideY)
  const { bin, out: smooth } = smoother
  const floor = noise * noise * smoother.laplacianNoise
  const follower = plan.guide ? createFollower(plan.guide, width, height) : null
  const moved = { x: 0, y: 0, strength: 0 }
  const crop: Crop = { x0: 0, y0: 0, columns: 0, rows: 0 }
  const peak = { x: 0, y: 0, value: 0 }
  const middleX = (width - 1) / 2
  const middleY = (height - 1) / 2
  return {
    score(luminance, clippedSamples, out) {
      follower?.shift(luminance, moved)
      out.x = centre.x + moved.x
      out.y = centre.y + moved.y
      cropAbout(middleX + moved.x, middleY + moved.y, sideX, sideY, width, height, crop)
      smoother.smooth(luminance, width, height, crop.x0, crop.y0, crop.columns, crop.rows)
      const across = Math.floor(crop.columns / bin)
      const down = Math.floor(crop.rows / bin)
      const flux = windowSum(luminance, width, crop) / (crop.columns * crop.rows)
      const safe = flux > 0 ? flux : Infinity
      quadraticPeak(smooth, across, down, peak)
      out.laplacian = (laplacianVariance(smooth, across, down) - floor) / (safe * safe)
      out.peak = peak.value / safe
      out.flux = flux
      out.background = 0
      out.saturated = clippedSamples >= plan.saturatedSamples
      out.empty = flux <= 0
      // Less than half of the patch is left in the frame.
      out.outOfField = crop.columns * crop.rows < 0.5 * sideX * sideY
    },
  }
}
