/**
 * What the patches of all frames say together.
 *
 * A patch by itself is noisy, and in most air the field moves as one. What the air really does is told by how patches agree: noise
 * does not reach from one patch to another, the air does. The covariance of local shifts over distance is fitted by variance ×
 * exp(−(distance / length)^1.5), smooth near zero as a wavefront's tilt over an aperture is; a patch's own variance beyond that is its noise. The best linear estimate at any place of the field is
 * then a weighted sum of all patches (Wiener; kriging, Matheron 1963, from memory of the names): noisy patches are led by their
 * neighbours, a place without structure is left to those around it, and where the air is alike everywhere all shifts go to zero.
 */
import { steadyExp } from '../../shared/steadymath'
import type { PatchTable, Place } from './types'

export interface Agreement {
  /** Variance that neighbours share, px² (or squared ratio), its standard error, and its length, px. */
  variance: number
  error: number
  lengthPx: number
}

/** Lengths that are tried, as multiples of the least distance of two patches. */
const LENGTHS = [0.7, 1, 1.5, 2.2, 3.3, 5, 8]
/** Local results farther than this many robust deviations from a patch's median are left out. */
const OUTLIER = 4

/** A patch's results less their median over the frames; NaN for outliers. Frames × places, as the table. */
export function centred(values: Float32Array, frames: number, places: number): { values: Float32Array, middle: Float64Array } {
  const out = new Float32Array(values.length).fill(NaN)
  const middle = new Float64Array(places)
  const column: number[] = []
  for (let p = 0; p < places; p++) {
    column.length = 0
    for (let f = 0; f < frames; f++) if (Number.isFinite(values[f * places + p]!)) column.push(values[f * places + p]!)
    if (column.length < 3) { middle[p] = NaN; continue }
    const m = median(column)
    const deviation = 1.4826 * median(column.map(v => Math.abs(v - m)))
    middle[p] = m
    for (let f = 0; f < frames; f++) {
      const off = values[f * places + p]! - m
      if (Math.abs(off) <= OUTLIER * deviation) out[f * places + p] = off
    }
  }
  return { values: out, middle }
}

function median(list: number[]): number {
  const sorted = [...list].sort((a, b) => a - b)
  return 0.5 * (sorted[(sorted.length - 1) >> 1]! + sorted[sorted.length >> 1]!)
}

/** Covariances of centred columns over the frames in which both are known; places × places. */
export function covariances(columns: Float32Array[], frames: number, places: number): { sum: Float64Array, count: Float64Array } {
  const sum = new Float64Array(places * places)
  const count = new Float64Array(places * places)
  for (const values of columns) {
    for (let f = 0; f < frames; f++) {
      const row = f * places
      for (let p = 0; p < places; p++) {
        const a = values[row + p]!
        if (Number.isNaN(a)) continue
        for (let q = p; q < places; q++) {
          const b = values[row + q]!
          if (Number.isNaN(b)) continue
          sum[p * places + q]! += a * b
          count[p * places + q]! += 1
        }
      }
    }
  }
  return { sum, count }
}

/**
 * Fits variance × exp(−(d / length)^1.5) to the covariances of different patches whose windows hardly overlap (least squares; the length is
 * the best of a few). The error comes from the scatter of the covariances about the fit.
 */
export function agreement({ sum, count }: { sum: Float64Array, count: Float64Array }, places: Place[], apart: number, weights: Float64Array): Agreement {
  const n = places.length
  const pairs: { k: number, c: number, w: number }[] = []
  for (let p = 0; p < n; p++) {
    for (let q = p + 1; q < n; q++) {
      const k = p * n + q
      const d = Math.hypot(places[p]!.x - places[q]!.x, places[p]!.y - places[q]!.y)
      if (d >= apart && count[k]! >= 8) pairs.push({ k, c: sum[k]! / count[k]!, w: count[k]! })
    }
  }
  let best: Agreement & { left: number } = { variance: 0, error: Infinity, lengthPx: apart, left: Infinity }
  if (pairs.length < 6) return best
  for (const multiple of LENGTHS) {
    const length = multiple * apart
    const like = likeness(places, places, length, weights)
    let hh = 0
    let hc = 0
    for (const { k, c, w } of pairs) {
      const h = like[k]!
      hh += w * h * h
      hc += w * h * c
    }
    const variance = hc / hh
    let left = 0
    let seen = 0
    for (const { k, c, w } of pairs) {
      left += w * (c - variance * like[k]!) ** 2
      seen += w
    }
    // Scatter of a pair of unit weight, over the information; pairs share patches, so that about one in n is independent.
    const error = Math.sqrt(left / pairs.length / hh * Math.max(1, pairs.length / n))
    if (left / seen < best.left) best = { variance, error, lengthPx: length, left: left / seen }
  }
  return best
}

/**
 * Estimates at the middles of tiles from the patches of each frame. Missing patches count as unknown.
 * @returns frames × tiles
 */
export function estimate(values: Float32Array, frames: number, places: Place[], middles: Place[], { variance, lengthPx }: Agreement, own: Float64Array, trust: Float64Array): Float32Array {
  const n = places.length
  const m = middles.length
  const out = new Float32Array(frames * m)
  if (!(variance > 0)) return out
  const toTiles = likeness(middles, places, lengthPx, trust)
  const among = likeness(places, places, lengthPx, trust)
  const cross = middles.map((_, t) => places.map((_, p) => variance * toTiles[t * n + p]!))
  const whole = places.map((_, a) => places.map((_, b) => variance * among[a * n + b]!))
  const solvers = new Map<string, Float64Array>()
  for (let f = 0; f < frames; f++) {
    const known: number[] = []
    for (let p = 0; p < n; p++) if (!Number.isNaN(values[f * n + p]!) && Number.isFinite(own[p]!)) known.push(p)
    if (known.length === 0) continue
    const key = known.join(' ')
    let weights = solvers.get(key)
    if (!weights) {
      // Weights = cross (whole + noise)⁻¹ over the known patches.
      const matrix = known.map(a => known.map(b => whole[a]![b]! + (a === b ? Math.max(own[a]! - whole[a]![a]!, 0.02 * variance) : 0)))
      const inverse = cholesky(matrix)
      weights = new Float64Array(m * known.length)
      for (let t = 0; t < m; t++) weights.set(inverse(known.map(p => cross[t]![p]!)), t * known.length)
      if (solvers.size < 64) solvers.set(key, weights)
    }
    for (let t = 0; t < m; t++) {
      let sum = 0
      for (let k = 0; k < known.length; k++) sum += weights[t * known.length + k]! * values[f * n + known[k]!]!
      out[f * m + t] = sum
    }
  }
  return out
}

/** What each patch counts in a frame's mean: the inverse of its variance, summing to 1; a patch that is all noise counts for nothing. */
export function meanWeights(columns: Float32Array[], frames: number, places: number): Float64Array {
  const own = ownVariances(covariances(columns, frames, places), places)
  const weights = own.map(variance => (variance > 0 && Number.isFinite(variance) ? 1 / variance : 0))
  const sum = weights.reduce((a, b) => a + b, 0)
  return sum > 0 ? weights.map(value => value / sum) : weights.fill(1 / places)
}

/** Frames × places less each frame's weighted mean over the patches that it knows. */
export function lessMean(values: Float32Array, frames: number, places: number, weights: Float64Array): Float32Array {
  const out = values.slice()
  for (let f = 0; f < frames; f++) {
    let sum = 0
    let known = 0
    for (let p = 0; p < places; p++) {
      const value = values[f * places + p]!
      if (Number.isNaN(value)) continue
      sum += weights[p]! * value
      known += weights[p]!
    }
    for (let p = 0; p < places; p++) out[f * places + p]! -= known > 0 ? sum / known : 0
  }
  return out
}

/**
 * exp(−(distance / length)^1.5) between places, as it is left when every frame's mean over the patches is taken out: of each side its mean over
 * the patches, plus the mean of all. from × to, row-major.
 */
function likeness(from: Place[], to: Place[], length: number, weights: Float64Array): Float64Array {
  const like = (a: Place, b: Place) => {
    const d = Math.hypot(a.x - b.x, a.y - b.y) / length
    return steadyExp(-d * Math.sqrt(d))
  }
  const mean = (place: Place) => to.reduce((sum, other, j) => sum + weights[j]! * like(place, other), 0)
  const toMeans = to.map(mean)
  const whole = toMeans.reduce((sum, value, j) => sum + weights[j]! * value, 0)
  const out = new Float64Array(from.length * to.length)
  from.forEach((place, i) => {
    const own = mean(place)
    to.forEach((other, j) => { out[i * to.length + j] = like(place, other) - own - toMeans[j]! + whole })
  })
  return out
}

/** Solver of a symmetric positive definite system by its Cholesky factor. */
function cholesky(a: number[][]): (b: number[]) => number[] {
  const n = a.length
  const l = a.map(row => [...row])
  for (let j = 0; j < n; j++) {
    for (let k = 0; k < j; k++) l[j]![j]! -= l[j]![k]! ** 2
    l[j]![j] = Math.sqrt(Math.max(1e-30, l[j]![j]!))
    for (let i = j + 1; i < n; i++) {
      for (let k = 0; k < j; k++) l[i]![j]! -= l[i]![k]! * l[j]![k]!
      l[i]![j]! /= l[j]![j]!
    }
  }
  return (b) => {
    const x = [...b]
    for (let i = 0; i < n; i++) {
      for (let k = 0; k < i; k++) x[i]! -= l[i]![k]! * x[k]!
      x[i]! /= l[i]![i]!
    }
    for (let i = n - 1; i >= 0; i--) {
      for (let k = i + 1; k < n; k++) x[i]! -= l[k]![i]! * x[k]!
      x[i]! /= l[i]![i]!
    }
    return x
  }
}

/** Own variances of patches: the diagonal of the covariances; Infinity where unknown. */
export function ownVariances({ sum, count }: { sum: Float64Array, count: Float64Array }, places: number): Float64Array {
  return Float64Array.from({ length: places }, (_, p) => (count[p * places + p]! > 2 ? sum[p * places + p]! / count[p * places + p]! : Infinity))
}

/** Local transfer over the frame's own, less 1, patch by patch (a patch's own level taken out); NaN where not known. */
export function relativeTransfer({ transfer, count }: PatchTable, own: ArrayLike<number>, places: number): Float32Array {
  const out = new Float32Array(transfer.length)
  for (let f = 0; f < count; f++) for (let p = 0; p < places; p++) out[f * places + p] = own[f]! > 0 ? transfer[f * places + p]! / own[f]! : NaN
  for (let p = 0; p < places; p++) {
    const column: number[] = []
    for (let f = 0; f < count; f++) if (Number.isFinite(out[f * places + p]!)) column.push(out[f * places + p]!)
    const level = column.length > 0 ? median(column) : NaN
    for (let f = 0; f < count; f++) out[f * places + p] = level > 0 ? out[f * places + p]! / level : NaN
  }
  return out
}
