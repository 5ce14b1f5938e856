/**
 * Hot and dead pixels found from the capture itself.
 *
 * A faulty pixel differs from its neighbours of the same colour in the same way in every frame, while the target
 * moves, breathes and is never sharper than the optics allow. Each pixel's low, middle and high value over the
 * surveyed frames are therefore compared with the same of its neighbours. Three things must hold: the middle value
 * stands out against the scatter of such differences nearby (so that fine structure of a target that stands still
 * is left alone), the low value (for a dead pixel the high one) stands out too, and the neighbours do not show the
 * flanks of a star of which this pixel would be the core.
 *
 * Common practice, no source; the star guard uses that ln(intensity) of a Gaussian is quadratic, so that its
 * centre follows from the 4 edge and the 4 corner neighbours wherever the star's centre lies.
 */
import type { MosaicPattern } from '../../shared/schemas/capture'
import type { Samples } from '../decode/types'

/** Frames used at most; enough for a steady median, few enough to be quick. */
const MAX_FRAMES = 32
/** Deviations from the local scatter that count as faulty. */
const SIGMAS = 7
/** How much more than a star's core, as its flanks predict, a faulty pixel must be. */
const STAR_MARGIN = 1.3

export interface FaultyPixels { hotPixels: Int32Array<ArrayBuffer>, repairFrom: Int32Array<ArrayBuffer> }

/**
 * @param frames stored frames spread over the capture, planes × height × width each
 * @returns indexes into a stored frame, ascending, and four neighbours to repair each from
 */
export function findFaultyPixels(frames: Samples[], width: number, height: number, planes: 1 | 3, mosaic: MosaicPattern): FaultyPixels {
  const size = width * height
  const step = mosaic === 'none' ? 1 : 2
  const found: number[] = []
  if (frames.length >= 4 && width > 4 * step && height > 4 * step) {
    for (let plane = 0; plane < planes; plane++) found.push(...findInPlane(frames, plane * size, width, height, step))
  }
  return { hotPixels: Int32Array.from(found), repairFrom: repairTable(found, width, height, step) }
}

interface OverTime { low: Float32Array, middle: Float32Array, high: Float32Array, scatter: Float32Array }

/** Each pixel's 20 %, 50 % and 80 % values over time. */
function overTime(frames: Samples[], offset: number, size: number): OverTime {
  const every = Math.max(1, Math.ceil(frames.length / MAX_FRAMES))
  const used = frames.filter((_, i) => i % every === 0)
  const n = used.length
  const low = new Float32Array(size)
  const middle = new Float32Array(size)
  const high = new Float32Array(size)
  const scatter = new Float32Array(size)
  const values = new Float32Array(n)
  const at20 = Math.floor(0.2 * (n - 1))
  const at80 = n - 1 - at20
  for (let i = 0; i < size; i++) {
    for (let f = 0; f < n; f++) {
      const value = used[f]![offset + i]!
      let k = f
      while (k > 0 && values[k - 1]! > value) { values[k] = values[k - 1]!; k-- }
      values[k] = value
    }
    low[i] = values[at20]!
    middle[i] = 0.5 * (values[(n - 1) >> 1]! + values[n >> 1]!)
    high[i] = values[at80]!
    // 80 % − 20 % of a Gaussian is 1.683 sigma; the median of n has 1.2533/√n of it.
    scatter[i] = (values[at80]! - values[at20]!) / 1.683 * 1.2533 / Math.sqrt(n)
  }
  return { low, middle, high, scatter }
}

const around = new Float32Array(8)
/** Median of the 8 neighbours of the same colour (mean of the middle two). */
function ringMedian(image: Float32Array, i: number, dx: number, dy: number): number {
  const indexes = [i - dy - dx, i - dy, i - dy + dx, i - dx, i + dx, i + dy - dx, i + dy, i + dy + dx]
  for (let f = 0; f < 8; f++) {
    const value = image[indexes[f]!]!
    let k = f
    while (k > 0 && around[k - 1]! > value) { around[k] = around[k - 1]!; k-- }
    around[k] = value
  }
  return 0.5 * (around[3]! + around[4]!)
}

function findInPlane(frames: Samples[], offset: number, width: number, height: number, step: number): number[] {
  const { low, middle, high, scatter } = overTime(frames, offset, width * height)
  const size = width * height
  const excess = new Float32Array(size)
  const inner = (x: number, y: number) => x >= step && y >= step && x < width - step && y < height - step
  for (let y = 0; y < height; y++) {
    for (let x = 0; x < width; x++) {
      const i = y * width + x
      excess[i] = inner(x, y) ? middle[i]! - ringMedian(middle, i, step, step * width) : middle[i]! - edgeMedian(middle, x, y, width, height, step)
    }
  }
  const floor = median(scatter.slice())
  // Samples are whole numbers: half a unit is the least difference that means anything.
  const quantum = frames[0] instanceof Float32Array ? 0 : 0.5
  const level = median(middle.slice())
  const found: number[] = []
  for (let y = 0; y < height; y++) {
    for (let x = 0; x < width; x++) {
      const i = y * width + x
      const e = excess[i]!
      const least = Math.max(SIGMAS * Math.max(floor, scatter[i]!), 4 * quantum)
      if (Math.abs(e) <= least) continue
      if (Math.abs(e) <= SIGMAS * 1.4826 * localScatter(excess, x, y, width, height, step)) continue
      const side = e > 0 ? low : high
      const sideExcess = inner(x, y) ? side[i]! - ringMedian(side, i, step, step * width) : side[i]! - edgeMedian(side, x, y, width, height, step)
      if (sideExcess * Math.sign(e) < 0.4 * Math.abs(e)) continue
      if (e > 0 && couldBeStar(middle, x, y, width, height, step, level, Math.max(SIGMAS * floor, 4 * quantum))) continue
      found.push(offset + i)
    }
  }
  return found
}

/** Median of whatever same-colour neighbours an edge pixel has. */
function edgeMedian(image: Float32Array, x: number, y: number, width: number, height: number, step: number): number {
  const values: number[] = []
  for (let j = -step; j <= step; j += step) {
    for (let k = -step; k <= step; k += step) {
      const xx = x + k
      const yy = y + j
      if ((j !== 0 || k !== 0) && xx >= 0 && yy >= 0 && xx < width && yy < height) values.push(image[yy * width + xx]!)
    }
  }
  return median(Float32Array.from(values))
}

/** Median absolute excess of the 24 neighbours of the same colour in a 5 × 5 block. */
function localScatter(excess: Float32Array, x: number, y: number, width: number, height: number, step: number): number {
  const values: number[] = []
  for (let j = -2; j <= 2; j++) {
    for (let k = -2; k <= 2; k++) {
      const xx = x + k * step
      const yy = y + j * step
      if ((j !== 0 || k !== 0) && xx >= 0 && yy >= 0 && xx < width && yy < height) values.push(Math.abs(excess[yy * width + xx]!))
    }
  }
  return median(Float32Array.from(values))
}

/** True where the neighbours look like the flanks of a star whose core this pixel is. */
function couldBeStar(image: Float32Array, x: number, y: number, width: number, height: number, step: number, level: number, least: number): boolean {
  if (x < step || y < step || x >= width - step || y >= height - step) return false
  const i = y * width + x
  const dy = step * width
  const core = image[i]! - level
  const edges = [image[i - step]!, image[i + step]!, image[i - dy]!, image[i + dy]!].map(v => v - level)
  const corners = [image[i - dy - step]!, image[i - dy + step]!, image[i + dy - step]!, image[i + dy + step]!].map(v => v - level)
  const edge = Math.min(...edges)
  const corner = Math.min(...corners)
  if (edge <= 0.5 * least) return false
  // Beside something twice as bright: its flank.
  if (Math.max(...edges, ...corners) > 2 * core) return true
  if (corner <= 0.25 * least) return core < 5 * (edges[0]! + edges[1]! + edges[2]! + edges[3]!) / 4
  const logOf = (values: number[]) => values.reduce((sum, v) => sum + Math.log(v), 0) / values.length
  const predicted = Math.exp(2 * logOf(edges) - logOf(corners))
  return core < STAR_MARGIN * predicted
}

function median(values: Float32Array): number {
  if (values.length === 0) return 0
  values.sort()
  const n = values.length
  return 0.5 * (values[(n - 1) >> 1]! + values[n >> 1]!)
}

/** Four sound same-colour neighbours for each faulty pixel: edge neighbours first, then corners, then farther ones. */
function repairTable(found: number[], width: number, height: number, step: number): Int32Array<ArrayBuffer> {
  const faulty = new Set(found)
  const table = new Int32Array(4 * found.length)
  const size = width * height
  for (const [h, index] of found.entries()) {
    const plane = Math.floor(index / size) * size
    const x = (index - plane) % width
    const y = Math.floor((index - plane) / width)
    const sound: number[] = []
    for (let reach = 1; reach <= 6 && sound.length < 4; reach++) {
      const candidates: [number, number][] = [[-reach, 0], [reach, 0], [0, -reach], [0, reach], [-reach, -reach], [reach, -reach], [-reach, reach], [reach, reach]]
      for (const [k, j] of candidates) {
        const xx = x + k * step
        const yy = y + j * step
        const at = plane + yy * width + xx
        if (xx >= 0 && yy >= 0 && xx < width && yy < height && !faulty.has(at) && sound.length < 4) sound.push(at)
      }
    }
    for (let k = 0; k < 4; k++) table[4 * h + k] = sound.length === 0 ? index : sound[k % sound.length]!
  }
  return table
}
