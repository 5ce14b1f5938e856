/**
 * Full width at half maximum of a star image without a model: the distance at which the image falls to half its peak,
 * along rays from the centre, by cubic interpolation. The median over the rays leaves out those that run into
 * a companion, so that a close double is no obstacle as long as half of the rays are free.
 */

export interface HalfWidth {
  /** Peak over the background, interpolated, sample units. */
  peak: number
  /** Full width at half maximum, px; null where the image is not a star (no fall to half within the frame). */
  fwhm: number | null
  /** Its standard error from the noise, px. */
  error: number | null
}

const RAYS = 48

/**
 * @param cx, cy centre of the star, px
 * @param noise standard deviation of a sample; 0 gives an error of 0
 */
export function halfWidth(image: Float32Array, width: number, height: number, cx: number, cy: number, background: number, noise: number): HalfWidth {
  const peak = refinedPeak(image, width, height, cx, cy)
  const top = peak.value - background
  if (!(top > 0)) return { peak: 0, fwhm: null, error: null }
  const half = background + 0.5 * top
  const reach = Math.min(peak.x, peak.y, width - 1 - peak.x, height - 1 - peak.y) - 1
  const radii: number[] = []
  const slopes: number[] = []
  // Rays by exact rotation: (cos, sin) of 2π/48 from a table would do; the recurrence keeps rounding below 1e-14.
  const c = 0.9914448613738104
  const s = 0.13052619222005157
  let ux = 1
  let uy = 0
  for (let k = 0; k < RAYS; k++) {
    let before = peak.value
    let r = 0
    let hit = NaN
    let slope = 0
    while (r < reach) {
      const next = r + 0.25
      const value = cubicAt(image, width, height, peak.x + next * ux, peak.y + next * uy)
      if (value <= half) {
        hit = r + 0.25 * (before - half) / (before - value)
        slope = (before - value) / 0.25
        break
      }
      before = value
      r = next
    }
    radii.push(hit)
    slopes.push(slope)
    const t = c * ux - s * uy
    uy = s * ux + c * uy
    ux = t
  }
  const found = radii.filter(Number.isFinite).sort((a, b) => a - b)
  if (found.length < RAYS / 2) return { peak: top, fwhm: null, error: null }
  // Rays that never fall count as far: the median is over all of them.
  const middle = 0.5 * (found[(RAYS >> 1) - 1]! + (found[RAYS >> 1] ?? found[found.length - 1]!))
  const free = radii.map((r, i) => i).filter(i => Number.isFinite(radii[i]!) && radii[i]! < 1.3 * middle)
  const slope = free.reduce((sum, i) => sum + slopes[i]!, 0) / Math.max(1, free.length)
  const radius = middle
  // Noise moves each crossing by noise/slope; crossings about one px apart are independent. The peak's own noise
  // moves the level of half for all rays together.
  const independent = Math.max(4, 2 * Math.PI * radius * free.length / RAYS)
  const each = slope > 0 ? noise / slope : 0
  const error = 2 * Math.sqrt(each * each / independent + 0.25 * each * each / Math.max(1, radius * radius))
  return { peak: top, fwhm: 2 * radius, error }
}

interface Refined { x: number, y: number, value: number }

/** Maximum of the logarithm's quadratic about the brightest sample within 1.5 px of a place: exact for Gaussians. */
function refinedPeak(image: Float32Array, width: number, height: number, cx: number, cy: number): Refined {
  let bx = Math.min(width - 2, Math.max(1, Math.round(cx)))
  let by = Math.min(height - 2, Math.max(1, Math.round(cy)))
  for (let step = 0; step < 3; step++) {
    let mx = bx
    let my = by
    for (let y = by - 1; y <= by + 1; y++) {
      for (let x = bx - 1; x <= bx + 1; x++) if (image[y * width + x]! > image[my * width + mx]!) { mx = x; my = y }
    }
    mx = Math.min(width - 2, Math.max(1, mx))
    my = Math.min(height - 2, Math.max(1, my))
    if (mx === bx && my === by) break
    bx = mx
    by = my
  }
  // Climb in the cubic interpolation, halving the step; no model of the image is needed.
  let x = bx
  let y = by
  let value = image[by * width + bx]!
  for (let step = 0.5; step > 0.004; step *= 0.5) {
    for (let again = 0; again < 4; again++) {
      let moved = false
      for (const [dx, dy] of [[step, 0], [-step, 0], [0, step], [0, -step]] as const) {
        if (Math.abs(x + dx - bx) > 1 || Math.abs(y + dy - by) > 1) continue
        const v = cubicAt(image, width, height, x + dx, y + dy)
        if (v > value) { value = v; x += dx; y += dy; moved = true }
      }
      if (!moved) break
    }
  }
  return { x, y, value }
}

/** Catmull-Rom cubic interpolation; beyond the frame its edge repeats. */
function cubicAt(image: Float32Array, width: number, height: number, x: number, y: number): number {
  const ix = Math.floor(x)
  const iy = Math.floor(y)
  const fx = x - ix
  const fy = y - iy
  let sum = 0
  for (let j = -1; j <= 2; j++) {
    const row = Math.min(height - 1, Math.max(0, iy + j)) * width
    const wy = catmull(fy, j)
    for (let k = -1; k <= 2; k++) sum += wy * catmull(fx, k) * image[row + Math.min(width - 1, Math.max(0, ix + k))]!
  }
  return sum
}

function catmull(f: number, at: number): number {
  switch (at) {
    case -1: return 0.5 * f * (-1 + f * (2 - f))
    case 0: return 1 + 0.5 * f * f * (3 * f - 5)
    case 1: return 0.5 * f * (1 + f * (4 - 3 * f))
    default: return 0.5 * f * f * (f - 1)
  }
}
