import { createBlur } from '../drift/smooth'
import { fitComponents, type Solved } from './fit'
import type { NoiseModel } from './noise'
import { profileWidth, radialMedian, withoutProfile } from './radial'
import { MeasureError, type Component, type MeasureImage } from './types'

/** A companion must stand so many times over the scatter of its surroundings. */
export const LEAST_SIGNIFICANCE = 5
const CANDIDATES = 4

export interface Scene {
  /** Sky level, and the robust scatter of the sky. */
  background: number
  sky: number
  /** Width of the star images, px. */
  fwhmPx: number
  brightest: { x: number, y: number }
}

/** Sky, brightest star and width of a stack. */
export function look(image: MeasureImage): Scene {
  const { width, height } = image
  const { middle: background, scatter: sky } = skyOf(image)
  const smooth = createBlur(width, height, 1)(image.samples)
  let best = -1
  for (let y = 2; y < height - 2; y++) {
    for (let i = y * width + 2; i < (y + 1) * width - 2; i++) if (best < 0 || smooth[i]! > smooth[best]!) best = i
  }
  const brightest = { x: best % width, y: Math.floor(best / width) }
  return { background, sky, brightest, fwhmPx: profileWidth(radialMedian(image, brightest.x, brightest.y), background) }
}

function skyOf({ samples, width, height }: MeasureImage): { middle: number, scatter: number } {
  // The outer tenth of the image, where stars seldom stand.
  const band = Math.max(2, Math.round(Math.min(width, height) / 10))
  const values: number[] = []
  for (let y = 0; y < height; y++) {
    for (let x = 0; x < width; x++) if (x < band || y < band || x >= width - band || y >= height - band) values.push(samples[y * width + x]!)
  }
  values.sort((a, b) => a - b)
  const middle = values[Math.floor(values.length * 0.4)]!
  const away = values.map(value => Math.abs(value - middle)).sort((a, b) => a - b)
  return { middle, scatter: 1.4826 * away[away.length >> 1]! }
}

export interface Search { scene: Scene, noise: NoiseModel, radius: number }

/**
 * Finds stars without hints: the brightest, then again and again whatever stands out most from what is explained, tried at its
 * few likeliest places; the place that leaves least unexplained wins.
 * @returns the components found, the brightest first, and how far each stands out; fewer than asked where no more stand out
 */
export function findComponents(image: MeasureImage, wanted: number, search: Search): { components: Component[], significance: number[] } {
  const { scene } = search
  let components: Component[] = [{ ...scene.brightest, flux: 1 }]
  const significance: number[] = [Infinity]
  while (components.length < wanted) {
    const rest = components.length === 1 ? aboutOne(image, scene) : aboutMany(image, components, search)
    let best: { solved: Solved, strength: number } | null = null
    for (const candidate of candidates(rest, image.width, image.height, scene.fwhmPx)) {
      if (candidate.strength < LEAST_SIGNIFICANCE) continue
      const flux = Math.min(1, Math.max(0.002, (image.samples[candidate.y * image.width + candidate.x]! - scene.background) / (image.samples[scene.brightest.y * image.width + scene.brightest.x]! - scene.background)))
      const solved = attempt(image, [...components, { x: candidate.x, y: candidate.y, flux: components.length === 1 ? flux : flux / 2 }], search)
      if (solved && (!best || solved.chiSquared < best.solved.chiSquared)) best = { solved, strength: candidate.strength }
    }
    if (!best) break
    components = inOrder(best.solved.state.components)
    significance.push(best.strength)
  }
  return { components, significance }
}

/** Brightest first; fluxes relative to it. */
export function inOrder(components: readonly Component[]): Component[] {
  const sorted = [...components].sort((a, b) => b.flux - a.flux)
  const unit = sorted[0]!.flux
  return sorted.map(star => ({ ...star, flux: star.flux / unit }))
}

function attempt(image: MeasureImage, start: Component[], { scene, noise, radius }: Search): Solved | null {
  try {
    const solved = fitComponents(image, start, { fwhmPx: scene.fwhmPx, background: scene.background, noise, harmonics: 0, radius })
    const { components } = solved.state
    const inside = components.every(star => star.flux > 1e-3 && star.x > 0 && star.y > 0 && star.x < image.width - 1 && star.y < image.height - 1)
    const apart = components.every((a, i) => components.every((b, j) => i >= j || Math.hypot(a.x - b.x, a.y - b.y) > scene.fwhmPx * 0.35))
    return inside && apart ? solved : null
  }
  catch (reason) {
    if (reason instanceof MeasureError) return null
    throw reason
  }
}

interface Rest { over: Float32Array, scatter: (x: number, y: number) => number }

/** What one star leaves: the image without the circles about it, against the scatter along each circle. */
function aboutOne(image: MeasureImage, { brightest, fwhmPx, sky }: Scene): Rest {
  const { x, y } = brightest
  const profile = radialMedian(image, x, y)
  const over = createBlur(image.width, image.height, Math.max(0.6, fwhmPx / 4))(withoutProfile(image, profile, x, y)).slice()
  const spread = radialMedian({ ...image, samples: over.map(Math.abs) }, x, y)
  const floor = sky / Math.max(1, fwhmPx / 2)
  return { over, scatter: (px, py) => Math.max(1.4826 * spread[Math.min(spread.length - 1, Math.round(Math.hypot(px - x, py - y)))]!, floor) }
}

/** What a fit of several stars leaves; beyond its pixels, what the circles about their common middle leave. */
function aboutMany(image: MeasureImage, components: Component[], search: Search): Rest {
  const { scene, noise, radius } = search
  const { width, height } = image
  const solved = fitComponents(image, components, { fwhmPx: scene.fwhmPx, background: scene.background, noise, harmonics: 0, radius })
  const flux = components.reduce((sum, star) => sum + star.flux, 0)
  const x0 = components.reduce((sum, star) => sum + star.flux * star.x, 0) / flux
  const y0 = components.reduce((sum, star) => sum + star.flux * star.y, 0) / flux
  const profile = radialMedian(image, x0, y0)
  const left = withoutProfile(image, profile, x0, y0)
  const spread = radialMedian({ ...image, samples: left.map(Math.abs) }, x0, y0)
  const explained = new Float32Array(width * height).fill(NaN)
  const row = new Float64Array(solved.model.parameters)
  for (let i = 0; i < solved.pixels.value.length; i++) {
    const at = solved.pixels.y[i]! * width + solved.pixels.x[i]!
    const value = solved.model.row(solved.state, i, row)
    left[at] = image.samples[at]! - value
    explained[at] = value - scene.background
  }
  const over = createBlur(width, height, Math.max(0.6, scene.fwhmPx / 4))(left).slice()
  const area = Math.max(1, Math.PI * (scene.fwhmPx / 2) ** 2)
  const floor = scene.sky ** 2 / area
  return {
    over,
    scatter(x, y) {
      const light = explained[y * width + x]!
      if (Number.isNaN(light)) return Math.max(1.4826 * spread[Math.min(spread.length - 1, Math.round(Math.hypot(x - x0, y - y0)))]!, Math.sqrt(floor))
      // Noise of the smoothed image, and two percent of what was explained: the form of the star image is not known better.
      return Math.sqrt(noise(light) / area + (0.02 * Math.max(0, light)) ** 2 + floor)
    },
  }
}

function candidates({ over, scatter }: Rest, width: number, height: number, fwhm: number): { x: number, y: number, strength: number }[] {
  const peaks: { x: number, y: number, strength: number }[] = []
  const edge = Math.max(2, Math.round(fwhm / 2))
  for (let y = edge; y < height - edge; y++) {
    for (let x = edge; x < width - edge; x++) {
      const value = over[y * width + x]!
      if (value <= 0) continue
      let top = true
      for (let dy = -1; dy <= 1 && top; dy++) for (let dx = -1; dx <= 1; dx++) if (over[(y + dy) * width + x + dx]! > value) top = false
      if (!top) continue
      peaks.push({ x, y, strength: value / scatter(x, y) })
    }
  }
  peaks.sort((a, b) => b.strength - a.strength)
  const chosen: typeof peaks = []
  for (const peak of peaks) {
    if (chosen.length >= CANDIDATES) break
    if (chosen.every(other => Math.hypot(other.x - peak.x, other.y - peak.y) > fwhm / 2)) chosen.push(peak)
  }
  return chosen
}
