/** The mean star image, and where a star image has its middle. */

const REACH = 24

/** Adds star images on whole pixels, to learn how wide they are. */
export class Cutouts {
  readonly side = 2 * REACH + 1
  readonly sum = new Float64Array(this.side * this.side)
  count = 0
  constructor(readonly width: number, readonly height: number) {}

  add(frame: Float32Array, x: number, y: number): void {
    if (x < REACH || y < REACH || x >= this.width - REACH || y >= this.height - REACH) return
    for (let dy = -REACH; dy <= REACH; dy++) {
      for (let dx = -REACH; dx <= REACH; dx++) this.sum[(dy + REACH) * this.side + dx + REACH]! += frame[(y + dy) * this.width + x + dx]!
    }
    this.count++
  }
}

/** Half width at half maximum of the mean star image, from the area over half of its peak, px; at least 1. */
export function halfWidthOf({ sum, side }: Cutouts): number {
  const middle = sum[REACH * side + REACH]!
  let area = 0
  for (const value of sum) if (value > middle / 2) area++
  return Math.max(1, Math.min(REACH / 3, Math.sqrt(area / Math.PI)))
}

/**
 * The centre of a star image under a Gaussian window that follows it (iterated until it stands still). The window keeps
 * the noise of the sky out, and lies symmetrically about the centre in the end, so that it does not pull.
 */
export function createWindowedCentre(width: number, height: number, halfWidthPx: number) {
  const sigma = 1.2 * halfWidthPx
  const reach = Math.ceil(3 * sigma)
  return (frame: Float32Array, x: number, y: number): { x: number, y: number } | null => {
    for (let round = 0; round < 30; round++) {
      const cx = Math.round(x)
      const cy = Math.round(y)
      if (cx < reach || cy < reach || cx >= width - reach || cy >= height - reach) return null
      let sum = 0
      let mx = 0
      let my = 0
      for (let py = cy - reach; py <= cy + reach; py++) {
        for (let px = cx - reach; px <= cx + reach; px++) {
          const weight = Math.exp(-((px - x) ** 2 + (py - y) ** 2) / (2 * sigma * sigma)) * frame[py * width + px]!
          sum += weight
          mx += weight * (px - x)
          my += weight * (py - y)
        }
      }
      if (!(sum > 0)) return null
      // Twice the windowed offset: for an image as wide as the window, one step then lands on the centre.
      const dx = 2 * mx / sum
      const dy = 2 * my / sum
      if (Math.hypot(dx, dy) > reach) return null
      x += dx
      y += dy
      if (Math.hypot(dx, dy) < 1e-3) break
    }
    return { x, y }
  }
}
