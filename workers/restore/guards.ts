/** Figures that tell when a restoration invents: what it puts beyond anything that was there. */

export interface Overshoot {
  /** Deepest dip below the darkest unrestored value nearby: dark rings around stars and limbs. Share of the image's range. */
  under: number
  /** Highest rise above the brightest unrestored value nearby; at a star it is wanted. */
  over: number
  /**
   * Across a disc's limb, the middle of its strongest edges: how far the restored image rises above what lies behind the edge
   * on its bright side, and falls below the sky before it, beyond what the unrestored image does already; share of the edge's
   * height. Null for other targets, whose edges may well have bright rims.
   */
  rimBright: number | null
  rimDark: number | null
}

/** Neighbourhood, in px to each side, within which an unrestored value excuses a restored one. */
const REACH = 2

export function overshootOf(before: Float32Array, after: Float32Array, width: number, height: number, planes: number, limb: boolean): Overshoot {
  const size = width * height
  let under = 0
  let over = 0
  for (let plane = 0; plane < planes; plane++) {
    const old = before.subarray(plane * size, (plane + 1) * size)
    const low = spread(old, width, height, Math.min)
    const high = spread(old, width, height, Math.max)
    let least = Infinity
    let most = -Infinity
    for (const value of old) {
      if (value < least) least = value
      if (value > most) most = value
    }
    const range = most - least
    if (!(range > 0)) continue
    for (let i = 0; i < size; i++) {
      const value = after[plane * size + i]!
      under = Math.max(under, (low[i]! - value) / range)
      over = Math.max(over, (value - high[i]!) / range)
    }
  }
  const middle = planes === 3 ? 1 : 0
  if (!limb) return { under, over, rimBright: null, rimDark: null }
  return { under, over, ...rims(before.subarray(middle * size, (middle + 1) * size), after.subarray(middle * size, (middle + 1) * size), width, height) }
}

/** Running minimum or maximum over a square of 2 × REACH + 1 px, rows then columns. */
function spread(image: Float32Array, width: number, height: number, pick: (a: number, b: number) => number): Float32Array {
  const rows = new Float32Array(image.length)
  const out = new Float32Array(image.length)
  for (let y = 0; y < height; y++) {
    for (let x = 0; x < width; x++) {
      let value = image[y * width + x]!
      for (let k = Math.max(0, x - REACH); k <= Math.min(width - 1, x + REACH); k++) value = pick(value, image[y * width + k]!)
      rows[y * width + x] = value
    }
  }
  for (let y = 0; y < height; y++) {
    for (let x = 0; x < width; x++) {
      let value = rows[y * width + x]!
      for (let k = Math.max(0, y - REACH); k <= Math.min(height - 1, y + REACH); k++) value = pick(value, rows[k * width + x]!)
      out[y * width + x] = value
    }
  }
  return out
}

/** Along a line across an edge: up to here the rim is looked for, and up to twice that what lies behind. px */
const NEAR = 7
const EDGES = 400

function rims(before: Float32Array, after: Float32Array, width: number, height: number): { rimBright: number, rimDark: number } {
  const bright: number[] = []
  const dark: number[] = []
  for (const { x, y, ux, uy } of strongestEdges(before, width, height)) {
    const old = across(before, width, x, y, ux, uy)
    const now = across(after, width, x, y, ux, uy)
    const step = mean(old, NEAR + 1, 2 * NEAR) - mean(old, -2 * NEAR, -NEAR - 1)
    if (!(step > 0)) continue
    const rise = (line: Float32Array) => (most(line, 0, NEAR) - most(line, NEAR + 1, 2 * NEAR)) / step
    const fall = (line: Float32Array) => (least(line, -2 * NEAR, -NEAR - 1) - least(line, -NEAR, 0)) / step
    bright.push(rise(now) - Math.max(0, rise(old)))
    dark.push(fall(now) - Math.max(0, fall(old)))
  }
  const middle = (values: number[]) => (values.length < 20 ? 0 : Math.max(0, values.sort((a, b) => a - b)[values.length >> 1]!))
  return { rimBright: middle(bright), rimDark: middle(dark) }
}

/** Places of at least half the steepest slope (over 2 px), evenly thinned, with the direction from dark to bright. */
function strongestEdges(image: Float32Array, width: number, height: number): { x: number, y: number, ux: number, uy: number }[] {
  const border = 2 * NEAR + 2
  const found: { x: number, y: number, ux: number, uy: number }[] = []
  const slope = (x: number, y: number) => {
    const o = y * width + x
    return { gx: image[o + 2]! - image[o - 2]!, gy: image[o + 2 * width]! - image[o - 2 * width]! }
  }
  let steepest = 0
  for (let y = border; y < height - border; y++) {
    for (let x = border; x < width - border; x++) {
      const { gx, gy } = slope(x, y)
      steepest = Math.max(steepest, gx * gx + gy * gy)
    }
  }
  for (let y = border; y < height - border; y++) {
    for (let x = border; x < width - border; x++) {
      const { gx, gy } = slope(x, y)
      const square = gx * gx + gy * gy
      if (square < 0.25 * steepest || square === 0) continue
      const g = Math.sqrt(square)
      found.push({ x, y, ux: gx / g, uy: gy / g })
    }
  }
  const every = Math.max(1, Math.floor(found.length / EDGES))
  return found.filter((_, i) => i % every === 0)
}

/** Values at −2 NEAR … 2 NEAR px along a direction, nearest samples. */
function across(image: Float32Array, width: number, x: number, y: number, ux: number, uy: number): Float32Array {
  return Float32Array.from({ length: 4 * NEAR + 1 }, (_, i) => {
    const t = i - 2 * NEAR
    return image[Math.round(y + t * uy) * width + Math.round(x + t * ux)]!
  })
}

const part = (line: Float32Array, from: number, to: number) => line.subarray(from + 2 * NEAR, to + 2 * NEAR + 1)
const mean = (line: Float32Array, from: number, to: number) => part(line, from, to).reduce((sum, v) => sum + v, 0) / (to - from + 1)
const most = (line: Float32Array, from: number, to: number) => part(line, from, to).reduce((a, b) => Math.max(a, b), -Infinity)
const least = (line: Float32Array, from: number, to: number) => part(line, from, to).reduce((a, b) => Math.min(a, b), Infinity)
