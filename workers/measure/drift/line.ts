/** A straight motion x = x0 + vx t, y = y0 + vy t. */
export interface Motion { x0: number, y0: number, vx: number, vy: number }

export const placeAt = ({ x0, y0, vx, vy }: Motion, t: number) => ({ x: x0 + vx * t, y: y0 + vy * t })

/**
 * The straight motion that most places agree with: every pair out of a spread sample of places proposes one, and the
 * one with most places within `tolerance` px wins (random sample consensus, Fischler & Bolles 1981, with an even sample
 * instead of a random one, so that the same capture always gives the same track).
 * @returns null where fewer than 3 places agree
 */
export function commonMotion(seconds: readonly number[], x: readonly number[], y: readonly number[], tolerance: number): { motion: Motion, agree: number } | null {
  const n = seconds.length
  const picks = Array.from({ length: Math.min(n, 60) }, (_, k) => Math.floor((k + 0.5) * n / Math.min(n, 60)))
  let best: { motion: Motion, agree: number } | null = null
  for (let a = 0; a < picks.length; a++) {
    for (let b = a + 1; b < picks.length; b++) {
      const i = picks[a]!
      const j = picks[b]!
      const dt = seconds[j]! - seconds[i]!
      if (Math.abs(dt) < 1e-9) continue
      const vx = (x[j]! - x[i]!) / dt
      const vy = (y[j]! - y[i]!) / dt
      const motion = { vx, vy, x0: x[i]! - vx * seconds[i]!, y0: y[i]! - vy * seconds[i]! }
      let agree = 0
      for (let k = 0; k < n; k++) {
        const place = placeAt(motion, seconds[k]!)
        if (Math.hypot(x[k]! - place.x, y[k]! - place.y) <= tolerance) agree++
      }
      if (!best || agree > best.agree) best = { motion, agree }
    }
  }
  return best && best.agree >= 3 ? best : null
}

/** Least squares through the places within `tolerance` of a motion. */
export function refineMotion(seconds: readonly number[], x: readonly number[], y: readonly number[], motion: Motion, tolerance: number): Motion {
  let n = 0
  let st = 0
  let sx = 0
  let sy = 0
  const near = seconds.map((t, k) => {
    const place = placeAt(motion, t)
    return Math.hypot(x[k]! - place.x, y[k]! - place.y) <= tolerance
  })
  seconds.forEach((t, k) => {
    if (!near[k]) return
    n++
    st += t
    sx += x[k]!
    sy += y[k]!
  })
  if (n < 3) return motion
  let tt = 0
  let tx = 0
  let ty = 0
  seconds.forEach((t, k) => {
    if (!near[k]) return
    const d = t - st / n
    tt += d * d
    tx += d * x[k]!
    ty += d * y[k]!
  })
  if (tt === 0) return motion
  const vx = tx / tt
  const vy = ty / tt
  return { vx, vy, x0: sx / n - vx * st / n, y0: sy / n - vy * st / n }
}
