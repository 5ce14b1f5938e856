/** Maxima of correlations: on the map, and between its samples. */
import { steadyCos, steadySin } from '../../shared/steadymath'

export interface Maximum { x: number, y: number, value: number }

/**
 * Highest sample of a map (zero shift at its corner) within a square search region.
 * @param step window pixels per map pixel
 */
export function highest(map: Float32Array, side: number, step: number, cx: number, cy: number, radius: number, out: Maximum): void {
  let best = -Infinity
  out.x = 0
  out.y = 0
  for (let y = 0; y < side; y++) {
    const sy = (y < side / 2 ? y : y - side) * step
    if (sy - cy > radius || sy - cy < -radius) continue
    for (let x = 0; x < side; x++) {
      const value = map[y * side + x]!
      if (value <= best) continue
      const sx = (x < side / 2 ? x : x - side) * step
      if (sx - cx > radius || sx - cx < -radius) continue
      best = value
      out.x = sx
      out.y = sy
    }
  }
  out.value = best
}

/** Highest local maximum of the map that is at least `apart` px from (bestX, bestY) and within the search radius. */
export function secondHighest(map: Float32Array, side: number, step: number, bestX: number, bestY: number, apart: number, radius: number): number {
  let second = -Infinity
  const limit = apart * apart
  const mask = side - 1
  for (let y = 0; y < side; y++) {
    const sy = y < side / 2 ? y : y - side
    if (sy * step > radius || sy * step < -radius) continue
    const row = y * side
    const up = ((y - 1) & mask) * side
    const down = ((y + 1) & mask) * side
    for (let x = 0; x < side; x++) {
      const value = map[row + x]!
      if (value <= second) continue
      const sx = x < side / 2 ? x : x - side
      if (sx * step > radius || sx * step < -radius) continue
      const ex = sx * step - bestX
      const ey = sy * step - bestY
      if (ex * ex + ey * ey < limit) continue
      const l = (x - 1) & mask
      const r = (x + 1) & mask
      if (value >= map[row + l]! && value >= map[row + r]! && value >= map[up + x]! && value >= map[down + x]!
        && value >= map[up + l]! && value >= map[up + r]! && value >= map[down + l]! && value >= map[down + r]!) second = value
    }
  }
  return second
}

/** Newton steps to the maximum of the Fourier sum, from a start within a map pixel of it. */
export function createNewton(cut: number, n: number): (spectrum: Float64Array, step: number, at: Maximum) => void {
  const cosY = new Float64Array(2 * cut + 1)
  const sinY = new Float64Array(2 * cut + 1)
  const omega = 2 * Math.PI / n
  const scale = 1 / (n * n)
  return (spectrum, step, at) => {
    const startX = at.x
    const startY = at.y
    let x = startX
    let y = startY
    for (let iteration = 0; iteration < 4; iteration++) {
      for (let ky = -cut; ky <= cut; ky++) {
        cosY[ky + cut] = steadyCos(omega * ky * y)
        sinY[ky + cut] = steadySin(omega * ky * y)
      }
      let value = 0
      let gx = 0
      let gy = 0
      let xx = 0
      let yy = 0
      let xy = 0
      for (let kx = 0, o = 0; kx <= cut; kx++) {
        // Column sums Σ S e^{iωky·y}, and with ky and ky² as weights.
        let re = 0
        let im = 0
        let re1 = 0
        let im1 = 0
        let re2 = 0
        let im2 = 0
        for (let k = 0; k <= 2 * cut; k++, o += 2) {
          const a = spectrum[o]! * cosY[k]! - spectrum[o + 1]! * sinY[k]!
          const b = spectrum[o]! * sinY[k]! + spectrum[o + 1]! * cosY[k]!
          const ky = k - cut
          re += a
          im += b
          re1 += ky * a
          im1 += ky * b
          re2 += ky * ky * a
          im2 += ky * ky * b
        }
        const c = steadyCos(omega * kx * x)
        const s = steadySin(omega * kx * x)
        const both = kx === 0 ? 1 : 2
        const real = re * c - im * s
        const imaginary = re * s + im * c
        value += both * real
        gx -= both * kx * imaginary
        xx -= both * kx * kx * real
        gy -= both * (re1 * s + im1 * c)
        xy -= both * kx * (re1 * c - im1 * s)
        yy -= both * (re2 * c - im2 * s)
      }
      at.value = value * scale
      at.x = x
      at.y = y
      const determinant = xx * yy - xy * xy
      if (!(determinant > 0) || xx >= 0) return
      const sx = (xy * gy - yy * gx) / determinant / omega
      const sy = (xy * gx - xx * gy) / determinant / omega
      if (!(Math.abs(sx) < step) || !(Math.abs(sy) < step)) return
      x += sx
      y += sy
      if (Math.abs(x - startX) > step || Math.abs(y - startY) > step) return
      if (Math.abs(sx) < 1e-5 && Math.abs(sy) < 1e-5) {
        at.x = x
        at.y = y
        return
      }
    }
  }
}
