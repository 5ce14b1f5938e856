/** What the times of the frames say: interval, gaps, disorder. */
import type { CaptureTimes } from '../../shared/schemas/capture'

export const noTimes: CaptureTimes = { start: null, end: null, source: 'none', medianIntervalMs: null, droppedFrames: 0, disordered: false }

/** .NET-style ticks (100 ns since 0001-01-01) of 1970-01-01. */
const TICKS_1970 = 621_355_968_000_000_000n
/** 1980 to 2200: ticks outside are not times of a capture. */
const TICKS_MIN = TICKS_1970 + 315_532_800n * 10_000_000n
const TICKS_MAX = TICKS_1970 + 7_258_118_400n * 10_000_000n

/** Milliseconds since 1970 of SER ticks, or null for zero and for what cannot be a time. */
export function unixMsOfTicks(ticks: bigint): number | null {
  if (ticks < TICKS_MIN || ticks > TICKS_MAX) return null
  return Number(ticks - TICKS_1970) / 10_000
}

function isoOf(unixMs: number): string {
  return new Date(unixMs).toISOString()
}

/**
 * Facts about frame times and seconds since the first frame. `unixMs` holds one time a frame, ms since 1970.
 * A gap is an interval over 1.5 medians; the frames missing in it are round(interval / median) − 1.
 */
export function summariseTimes(unixMs: Float64Array, source: CaptureTimes['source']): { times: CaptureTimes, seconds: Float64Array | null } {
  const n = unixMs.length
  if (n === 0) return { times: noTimes, seconds: null }
  const first = unixMs[0]!
  const intervals = new Float64Array(Math.max(0, n - 1))
  let disordered = false
  for (let i = 1; i < n; i++) {
    intervals[i - 1] = unixMs[i]! - unixMs[i - 1]!
    if (intervals[i - 1]! < 0) disordered = true
  }
  const positive = intervals.filter(interval => interval > 0).sort()
  const median = positive.length ? positive[positive.length >> 1]! : null
  let dropped = 0
  if (median) for (const interval of intervals) if (interval > 1.5 * median) dropped += Math.round(interval / median) - 1
  const seconds = new Float64Array(n)
  for (let i = 0; i < n; i++) seconds[i] = (unixMs[i]! - first) / 1000
  return {
    times: { start: isoOf(first), end: isoOf(unixMs[n - 1]!), source, medianIntervalMs: median, droppedFrames: dropped, disordered },
    // Frames that all bear one time say nothing about the time between them.
    seconds: n === 1 || positive.length ? seconds : null,
  }
}
