import { motionCorrelation } from './motion-noise'

/** Straight lines through two coordinates with correlated errors; slopes and their variances. */
export interface Straight { slope: [number, number], at0: [number, number], slopeVariance: [number, number] }

/**
 * Crossing times that are tried, s, and how likely each is beforehand: about half the time in which the wind crosses the
 * aperture. Apertures of 0.1-0.5 m and winds of 4-20 m/s (common practice, no source) give a logarithmic normal about 14 ms
 * with a factor of 2.5; slower air in a dome or a tube is the tail.
 */
const CROSSINGS = [0.004, 0.008, 0.016, 0.03, 0.06, 0.12, 0.25].map(seconds => ({ seconds, logPrior: -0.5 * (Math.log(seconds / 0.014) / Math.log(2.5)) ** 2 }))
/**
 * Shares of white noise (photons, pixels, the shape of the speckles), and how likely each is beforehand: a star that is
 * bright enough to be followed moves by far more than its centre is uncertain.
 */
const WHITE = [0.02, 0.08, 0.2, 0.4, 0.7, 1].map(share => ({ share, logPrior: -Math.log(0.2 + share) }))

/**
 * Generalised least squares with the covariance of motion-noise.ts plus white noise. Crossing time, share of white noise
 * and strength are not known: each combination is weighed by its restricted likelihood (Patterson & Thompson 1971,
 * Biometrika 58, 545), and its lines and errors are averaged with these weights, so that not knowing the air widens the error.
 * @param weights how many frames stand behind each point
 */
export function fitStraight(seconds: Float64Array, u: Float64Array, v: Float64Array, weights: Float64Array): Straight {
  const n = seconds.length
  const middle = seconds.reduce((sum, t) => sum + t, 0) / n
  const time = seconds.map(t => t - middle)
  const models: { weight: number, variance: number, lines: Line[] }[] = []
  for (const { seconds: crossing, logPrior } of CROSSINGS) {
    const correlation = correlationMatrix(time, crossing)
    for (const white of WHITE) {
      const factor = choleskyOf(correlation, white.share, weights)
      if (!factor) continue
      const lines = [u, v].map(values => lineThrough(factor, time, values))
      // One strength for both coordinates: layers that blow in different directions move the image alike in all directions.
      const variance = Math.max((lines[0]!.squares + lines[1]!.squares) / (2 * n - 4), 1e-30)
      models.push({ weight: logPrior + white.logPrior - (n - 2) * Math.log(variance) - lines[0]!.logDeterminant, variance, lines })
    }
  }
  const best = Math.max(...models.map(model => model.weight))
  const shares = models.map(model => Math.exp(model.weight - best))
  const total = shares.reduce((sum, share) => sum + share, 0)
  const mean = (value: (line: Line, variance: number) => number, axis: 0 | 1) => models.reduce((sum, model, k) => sum + shares[k]! * value(model.lines[axis]!, model.variance), 0) / total
  const slope: [number, number] = [mean(line => line.slope, 0), mean(line => line.slope, 1)]
  const variance = (axis: 0 | 1) => mean((line, strength) => strength * line.slopeVariance + (line.slope - slope[axis]) ** 2, axis)
  return { slope, at0: [mean(line => line.level, 0) - slope[0] * middle, mean(line => line.level, 1) - slope[1] * middle], slopeVariance: [variance(0), variance(1)] }
}

/** `slopeVariance` for unit strength; `squares`: the whitened squared residuals; `logDeterminant`: of the covariance and of the line's own. */
interface Line { slope: number, level: number, slopeVariance: number, squares: number, logDeterminant: number }

function correlationMatrix(time: Float64Array, crossing: number): Float64Array {
  const n = time.length
  const out = new Float64Array(n * n)
  for (let i = 0; i < n; i++) {
    for (let j = 0; j <= i; j++) out[i * n + j] = motionCorrelation(time[i]! - time[j]!, crossing)
  }
  return out
}

/** Lower Cholesky factor of (1 − white) × correlation + white / weights on the diagonal. */
function choleskyOf(correlation: Float64Array, white: number, weights: Float64Array): { factor: Float64Array, n: number } | null {
  const n = weights.length
  const factor = new Float64Array(n * n)
  for (let i = 0; i < n; i++) {
    for (let j = 0; j <= i; j++) {
      let sum = (1 - white) * correlation[i * n + j]! + (i === j ? white / weights[i]! : 0)
      for (let k = 0; k < j; k++) sum -= factor[i * n + k]! * factor[j * n + k]!
      if (i !== j) factor[i * n + j] = sum / factor[j * n + j]!
      else if (sum > 1e-12) factor[i * n + i] = Math.sqrt(sum)
      else return null
    }
  }
  return { factor, n }
}

function lineThrough({ factor, n }: { factor: Float64Array, n: number }, time: Float64Array, values: Float64Array): Line {
  const one = whiten(factor, n, () => 1)
  const t = whiten(factor, n, i => time[i]!)
  const y = whiten(factor, n, i => values[i]!)
  const dot = (a: Float64Array, b: Float64Array) => a.reduce((sum, value, i) => sum + value * b[i]!, 0)
  const a = dot(one, one)
  const b = dot(one, t)
  const c = dot(t, t)
  const det = a * c - b * b
  const p = dot(one, y)
  const q = dot(t, y)
  const level = (c * p - b * q) / det
  const slope = (a * q - b * p) / det
  let squares = 0
  let logDeterminant = 0
  for (let i = 0; i < n; i++) {
    squares += (y[i]! - level * one[i]! - slope * t[i]!) ** 2
    logDeterminant += 2 * Math.log(factor[i * n + i]!)
  }
  return { slope, level, slopeVariance: a / det, squares, logDeterminant: logDeterminant + Math.log(det) }
}

/** Solves L z = values. */
function whiten(factor: Float64Array, n: number, value: (i: number) => number): Float64Array {
  const out = new Float64Array(n)
  for (let i = 0; i < n; i++) {
    let sum = value(i)
    for (let k = 0; k < i; k++) sum -= factor[i * n + k]! * out[k]!
    out[i] = sum / factor[i * n + i]!
  }
  return out
}
