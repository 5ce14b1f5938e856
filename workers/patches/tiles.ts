/** Adds tiles of a shifted frame to fixed-point sums, and counts what covers each pixel. */
import type { ResampleKernel } from '../../shared/schemas/recipe'
import { coveredBy, FIXED_LIMIT } from '../stack/accumulate'
import { coverageCounts, coverageMarks, markCovered } from '../stack/coverage'
import { axisShift } from '../stack/weights'
import { axisWeights, tileCount, type AxisWeights } from './mesh'
import type { Mesh } from './types'

/** Rounds a double of magnitude below 2^51 to an integer, halves to even. */
const ROUND = 6_755_399_441_055_744

export interface TileAdder {
  /**
   * sum[Y, X] += sign × round(weight(Y, X) × scale × source(X − dx, Y − dy)) over the tile, where the plane covers (X, Y).
   * Integers: any order of frames, tiles and workers gives the same sums, and taking away undoes adding.
   */
  add(source: Float32Array, tile: number, dx: number, dy: number, kernel: ResampleKernel, scale: number, sign: 1 | -1, sum: Int32Array): void
}

export function createTileAdder(mesh: Mesh): TileAdder {
  const { width, height, columns } = mesh
  const across = axisWeights(width, columns)
  const down = axisWeights(height, mesh.rows)
  const row = new Float64Array(width + 8)
  const line = new Float64Array(width)
  return {
    add(source, tile, dx, dy, kernel, scale, sign, sum) {
      const wx = across[tile % columns]!
      const wy = down[Math.floor(tile / columns)]!
      const ax = axisShift(kernel, dx, width)
      const ay = axisShift(kernel, dy, height)
      const x0 = Math.max(ax.from, wx.from)
      const x1 = Math.min(ax.to, wx.from + wx.weights.length)
      const y1 = Math.min(ay.to, wy.from + wy.weights.length)
      if (x1 <= x0) return
      const taps = ax.weights
      const reach = taps.length
      for (let y = Math.max(ay.from, wy.from); y < y1; y++) {
        blend(source, width, height, y + ay.offset, ay.weights, x0 + ax.offset, x1 - x0 + reach - 1, row)
        const gain = wy.weights[y - wy.from]! * scale
        const weights = wx.weights
        const first = x0 - wx.from
        const out = y * width + x0
        const n = x1 - x0
        // The taps along the row, two at a time: every kernel has an even number of them, or one.
        line.fill(0, 0, n)
        for (let k = 0; k + 1 < reach; k += 2) {
          const p = taps[k]!
          const q = taps[k + 1]!
          for (let x = 0; x < n; x++) line[x]! += p * row[x + k]! + q * row[x + k + 1]!
        }
        if (reach === 1) for (let x = 0; x < n; x++) line[x] = row[x]!
        for (let x = 0; x < n; x++) sum[out + x]! += sign * fixed(line[x]! * (gain * weights[first + x]!))
      }
    },
  }
}

/** Blends the source rows of one output row from column x0 on; beyond the edges the last sample repeats. */
function blend(source: Float32Array, width: number, height: number, y: number, weights: Float32Array, x0: number, count: number, row: Float64Array): void {
  for (let k = 0; k < weights.length; k++) {
    const from = Math.min(height - 1, Math.max(0, y + k)) * width
    const weight = weights[k]!
    const inside = Math.max(0, -x0)
    const end = Math.min(count, width - x0)
    if (k === 0) for (let x = inside; x < end; x++) row[x] = weight * source[from + x0 + x]!
    else for (let x = inside; x < end; x++) row[x]! += weight * source[from + x0 + x]!
    for (let x = 0; x < inside && x < count; x++) row[x] = (k === 0 ? 0 : row[x]!) + weight * source[from]!
    for (let x = Math.max(0, end); x < count; x++) row[x] = (k === 0 ? 0 : row[x]!) + weight * source[from + width - 1]!
  }
}

function fixed(value: number): number {
  const clipped = value > FIXED_LIMIT ? FIXED_LIMIT : value < -FIXED_LIMIT ? -FIXED_LIMIT : value
  // Not-a-number comes out as 0.
  return (clipped + ROUND - ROUND) | 0
}

/**
 * Weight that lies on each pixel: the sum over tiles of the tile's weight times the frames of that tile which cover the pixel.
 * @param visit calls back with every frame's shift in a tile
 */
export function tileCoverage(mesh: Mesh, kernel: ResampleKernel, visit: (tile: number, mark: (dx: number, dy: number) => void) => void): Float64Array {
  const { width, height, columns, rows } = mesh
  const across = axisWeights(width, columns)
  const down = axisWeights(height, rows)
  const out = new Float64Array(width * height)
  for (let tile = 0; tile < tileCount(mesh); tile++) {
    const wx = across[tile % columns]!
    const wy = down[Math.floor(tile / columns)]!
    const w = wx.weights.length
    const h = wy.weights.length
    const marks = coverageMarks(w, h)
    visit(tile, (dx, dy) => markCovered(marks, w, within(coveredBy(kernel, width, height, dx, dy), wx, wy), 1))
    const counts = coverageCounts(marks, w, h)
    for (let y = 0; y < h; y++) for (let x = 0; x < w; x++) out[(wy.from + y) * width + wx.from + x]! += counts[y * w + x]! * wx.weights[x]! * wy.weights[y]!
  }
  return out
}

function within({ x0, y0, x1, y1 }: { x0: number, y0: number, x1: number, y1: number }, wx: AxisWeights, wy: AxisWeights) {
  const clip = (value: number, length: number) => Math.min(length, Math.max(0, value))
  return { x0: clip(x0 - wx.from, wx.weights.length), x1: clip(x1 - wx.from, wx.weights.length), y0: clip(y0 - wy.from, wy.weights.length), y1: clip(y1 - wy.from, wy.weights.length) }
}
