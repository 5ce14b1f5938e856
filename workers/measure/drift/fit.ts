import { DEGREES, reduce360 } from '../../../shared/astro/angles'
import { fitStraight, type Straight } from './straight'
import { DriftError, type DriftFit, type DriftTrack } from './types'

/** Points that the covariance is set up for; more frames than that are averaged in groups. */
const MOST_POINTS = 240
/** Places farther off than so many robust standard deviations are left out. */
const OUTLIER = 5

/** A straight track through the star's places, with the outliers left out and honest errors. Throws DriftError. */
export function fitTrack(track: DriftTrack): DriftFit {
  let keep = Array.from(track.frame, (_, k) => k)
  let line = straightThrough(track, keep)
  for (let round = 0; round < 3; round++) {
    const next = within(track, line)
    if (next.length < 10) throw new DriftError('The star’s places do not lie along a straight line.')
    const same = next.length === keep.length
    keep = next
    if (same) break
    line = straightThrough(track, keep)
  }
  const [vx, vy] = line.slope
  const speed = Math.hypot(vx, vy)
  const [ux, uy] = [vx / speed, vy / speed]
  const residuals = { seconds: new Float64Array(keep.length), along: new Float64Array(keep.length), across: new Float64Array(keep.length) }
  keep.forEach((i, k) => {
    const { dx, dy } = offset(track, line, i)
    residuals.seconds[k] = track.seconds[i]!
    residuals.along[k] = dx * ux + dy * uy
    residuals.across[k] = -dx * uy + dy * ux
  })
  // The errors of the two coordinates, turned into along and across.
  const [vxx, vyy] = line.slopeVariance
  const durationS = track.seconds[keep.at(-1)!]! - track.seconds[keep[0]!]!
  const rms = (values: Float64Array) => Math.sqrt(values.reduce((sum, value) => sum + value * value, 0) / values.length)
  return {
    speed, speedErr: Math.sqrt(ux * ux * vxx + uy * uy * vyy),
    directionDeg: reduce360(Math.atan2(-vy, vx) * DEGREES), directionErrDeg: Math.sqrt(uy * uy * vxx + ux * ux * vyy) / speed * DEGREES,
    leftOut: track.frame.length - keep.length, residuals, motionPx: { along: rms(residuals.along), across: rms(residuals.across) },
    lengthPx: speed * durationS, durationS,
  }
}

function offset(track: DriftTrack, { slope, at0 }: Straight, i: number): { dx: number, dy: number } {
  const t = track.seconds[i]!
  return { dx: track.x[i]! - at0[0] - slope[0] * t, dy: track.y[i]! - at0[1] - slope[1] * t }
}

function within(track: DriftTrack, line: Straight): number[] {
  const distance = Float64Array.from(track.frame, (_, i) => {
    const { dx, dy } = offset(track, line, i)
    return Math.hypot(dx, dy)
  })
  // For two normal coordinates the median distance is 1.1774 standard deviations.
  const sigma = distance.slice().sort()[distance.length >> 1]! / 1.1774
  const most = Math.max(OUTLIER * sigma, 0.05)
  return Array.from(distance, (_, i) => i).filter(i => distance[i]! <= most)
}

/** Averages neighbouring places into at most MOST_POINTS points and fits them. */
function straightThrough(track: DriftTrack, keep: readonly number[]): Straight {
  const order = keep.slice().sort((a, b) => track.seconds[a]! - track.seconds[b]!)
  const group = Math.ceil(order.length / MOST_POINTS)
  const points = Math.ceil(order.length / group)
  const [seconds, x, y, weights] = [new Float64Array(points), new Float64Array(points), new Float64Array(points), new Float64Array(points)]
  order.forEach((i, k) => {
    const point = Math.floor(k / group)
    weights[point]!++
    seconds[point]! += track.seconds[i]!
    x[point]! += track.x[i]!
    y[point]! += track.y[i]!
  })
  for (let point = 0; point < points; point++) {
    seconds[point]! /= weights[point]!
    x[point]! /= weights[point]!
    y[point]! /= weights[point]!
  }
  return fitStraight(seconds, x, y, weights)
}
