/** Bytes a second, smoothed so that the time left does not jump: what is older than the half-life counts half. */
const HALF_LIFE_MS = 4000
const STEP_MS = 500

export interface Rate { bytesPerSecond: number, at: number, bytes: number }

export const startRate = (at: number, bytes = 0): Rate => ({ bytesPerSecond: 0, at, bytes })

/** The rate after `bytes` were done at time `now` (ms). Bytes that went back (an upload taken up again) start the measuring anew. */
export function nextRate(rate: Rate, now: number, bytes: number): Rate {
  if (bytes < rate.bytes) return startRate(now, bytes)
  const span = now - rate.at
  if (span < STEP_MS) return rate
  const current = 1000 * (bytes - rate.bytes) / span
  const weight = rate.bytesPerSecond === 0 ? 1 : 1 - 0.5 ** (span / HALF_LIFE_MS)
  return { bytesPerSecond: rate.bytesPerSecond + weight * (current - rate.bytesPerSecond), at: now, bytes }
}
