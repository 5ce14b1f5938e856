/**
 * How the reference is made and refined.
 *
 * Start: survey() gives a provisional reference from the sharpest surveyed frames. Grade registers every frame
 * against it while scoring. Then, for each refine round:
 *   1. take the frames that nextReferenceFrames() names: the best `referenceFraction` of the ranked, sure frames,
 *      and at least LEAST_FRAMES of them (fewer would let one frame's speckles into the reference);
 *   2. shift each by its own (dx, dy) with the recipe's kernel and take the plain mean of the luminance;
 *   3. build a new registrar on it with the same refX, refY (shifts are relative to the reference, so its target stays
 *      where it was) and register all frames again.
 * Two rounds are enough: the second changes shifts of good frames by some hundredths of a pixel.
 * The mean is not weighted: within the best few per cent quality differs little, and a plain mean is what is shown.
 * A pairwise shift to one reference is the best choice above a signal threshold (Aguerrebere et al. 2016,
 * arXiv:1602.01541); below it a reference from many frames reaches what a noisy single frame cannot
 * (Clement, Bierbaum & Sethna 2018, arXiv:1809.05583), which is why one frame is never a reference for long.
 */
import { createWindowBlur } from '../score/blur'
import { quadraticAt } from '../score/measures'

/** Fewest frames in a refined reference, as far as there are that many. */
export const LEAST_FRAMES = 8

/**
 * The frames of the next reference, best first.
 * @param ranked frame numbers, best first, without frames that were set aside
 */
export function nextReferenceFrames(ranked: ArrayLike<number>, referenceFraction: number): Int32Array {
  const count = Math.min(ranked.length, Math.max(LEAST_FRAMES, Math.round(referenceFraction * ranked.length)))
  const frames = new Int32Array(count)
  for (let i = 0; i < count; i++) frames[i] = ranked[i]!
  return frames
}

/** A star's image in the reference: place in frame pixels and strength relative to the brightest. */
export interface StarImage { x: number, y: number, weight: number }

/** Components fainter than this share of the brightest do not help to register. */
const LEAST_WEIGHT = 0.2
/** A second star must rise from a saddle below this share of its own height. */
const DEEPEST_SADDLE = 0.85
const MOST_STARS = 6

/**
 * The star images of a reference within the window about (refX, refY): separate maxima of the smoothed reference,
 * each less the halo of the brightest at its distance (the halo's level is the median on the circle about the brightest).
 * The brightest comes first, with weight 1. Always at least one.
 */
export function starImages(reference: Float32Array, width: number, height: number, refX: number, refY: number, blurPx: number, windowPx: number): StarImage[] {
  const n = Math.min(windowPx, width, height)
  const x0 = Math.min(Math.max(0, Math.round(refX) - (n >> 1)), width - n)
  const y0 = Math.min(Math.max(0, Math.round(refY) - (n >> 1)), height - n)
  const smooth = new Float32Array(n * n)
  createWindowBlur(Math.max(0.7, blurPx), n, n).blur(reference, width, height, x0, y0, n, n, smooth)
  const background = borderMedian(smooth, n)
  const maxima: number[] = []
  for (let y = 2; y < n - 2; y++) {
    for (let x = 2; x < n - 2; x++) {
      const i = y * n + x
      const v = smooth[i]!
      if (v > smooth[i - 1]! && v >= smooth[i + 1]! && v > smooth[i - n]! && v >= smooth[i + n]!
        && v > smooth[i - n - 1]! && v > smooth[i - n + 1]! && v >= smooth[i + n - 1]! && v >= smooth[i + n + 1]!) maxima.push(i)
    }
  }
  maxima.sort((a, b) => smooth[b]! - smooth[a]! || a - b)
  const peak = { x: 0, y: 0, value: 0 }
  const found: StarImage[] = []
  const kept: number[] = []
  let top = 0
  for (const i of maxima) {
    if (found.length >= MOST_STARS) break
    quadraticAt(smooth, n, i, peak)
    const h = peak.value - background
    if (found.length === 0) {
      top = h
      found.push({ x: x0 + peak.x, y: y0 + peak.y, weight: 1 })
      kept.push(i)
      if (!(top > 0)) break
      continue
    }
    if (h < LEAST_WEIGHT * top) break
    const separate = kept.every(other => saddle(smooth, n, i, other) - background < DEEPEST_SADDLE * h)
    if (!separate) continue
    const halo = circleMedian(smooth, n, found[0]!.x - x0, found[0]!.y - y0, peak.x, peak.y) - background
    const weight = (h - halo) / top
    if (weight < LEAST_WEIGHT) continue
    found.push({ x: x0 + peak.x, y: y0 + peak.y, weight: Math.min(1, weight) })
    kept.push(i)
  }
  if (found.length === 0) found.push({ x: refX, y: refY, weight: 1 })
  return found
}

/** Lowest value on the straight line between two samples. */
function saddle(image: Float32Array, n: number, a: number, b: number): number {
  const ax = a % n
  const ay = (a - ax) / n
  const bx = b % n
  const by = (b - bx) / n
  const steps = Math.max(1, 2 * Math.ceil(Math.max(Math.abs(bx - ax), Math.abs(by - ay))))
  let lowest = Infinity
  for (let s = 0; s <= steps; s++) {
    const x = Math.round(ax + (bx - ax) * s / steps)
    const y = Math.round(ay + (by - ay) * s / steps)
    lowest = Math.min(lowest, image[y * n + x]!)
  }
  return lowest
}

function circleMedian(image: Float32Array, n: number, cx: number, cy: number, px: number, py: number): number {
  const rx = px - cx
  const ry = py - cy
  const values: number[] = []
  // Sixteen directions by turning the vector through exact rational rotations of 22.6° (5-12-13).
  let vx = rx
  let vy = ry
  for (let k = 0; k < 16; k++) {
    const x = Math.round(cx + vx)
    const y = Math.round(cy + vy)
    if (x >= 0 && y >= 0 && x < n && y < n) values.push(image[y * n + x]!)
    const tx = (12 * vx - 5 * vy) / 13
    vy = (5 * vx + 12 * vy) / 13
    vx = tx
  }
  values.sort((a, b) => a - b)
  return values.length > 0 ? values[values.length >> 1]! : 0
}

function borderMedian(image: Float32Array, n: number): number {
  const values: number[] = []
  for (let k = 0; k < n; k++) values.push(image[k]!, image[(n - 1) * n + k]!, image[k * n]!, image[k * n + n - 1]!)
  values.sort((a, b) => a - b)
  return values[values.length >> 1]!
}
