import { angleDifference } from '../../../shared/astro/angles'
import { bootstrapErrors, relativeTo, type Relative, type RelativeErr } from './bootstrap'
import { findComponents, inOrder, LEAST_SIGNIFICANCE, look, type Scene } from './find'
import { fitComponents, responseOf, summaryOf, type Solved } from './fit'
import type { NoiseModel } from './noise'
import { radialMedian } from './radial'
import { MeasureError, type Component, type MeasureImage, type PairFit } from './types'
import type { PairValues } from '../../../shared/schemas/measure'

/** Radius about each star that takes part in the fit, in widths of the star image. */
const REACH = 6
/** Fewer blocks than this tell no error. */
export const LEAST_BLOCKS = 5

export interface Found { solved: Solved, fit: PairFit, scene: Scene, blind: boolean }

/** Looks for the components (or takes the hints) and fits them; null where fewer than wanted stand out. */
export function findAndFit(image: MeasureImage, wanted: number, noise: NoiseModel, hints: readonly { x: number, y: number }[] | undefined): Found | { scene: Scene, found: number } {
  const scene = look(image)
  const search = { scene, noise, radius: reachOf(scene, image) }
  const blind = !hints || hints.length < wanted
  const start = blind ? findComponents(image, wanted, search) : { components: started(image, scene, hints), significance: [] }
  if (start.components.length < wanted) return { scene, found: start.components.length }
  const solved = refit(image, start.components, scene, noise)
  return { solved, fit: summaryOf(solved), scene, blind }
}

const reachOf = ({ fwhmPx }: Scene, image: MeasureImage): number => Math.max(8, Math.min(REACH * fwhmPx, Math.min(image.width, image.height) / 2))

function started(image: MeasureImage, { background }: Scene, hints: readonly { x: number, y: number }[]): Component[] {
  const height = ({ x, y }: { x: number, y: number }) => {
    let best = -Infinity
    for (let dy = -1; dy <= 1; dy++) {
      for (let dx = -1; dx <= 1; dx++) best = Math.max(best, image.samples[(Math.round(y) + dy) * image.width + Math.round(x) + dx] ?? -Infinity)
    }
    return Math.max(1e-3, best - background)
  }
  return inOrder(hints.map(hint => ({ ...hint, flux: height(hint) })))
}

interface Settings { harmonics: number, radius: number, spacing: number }

/** As much angular form as the distance of the components lets the data tell from a companion. */
function settingsFor(image: MeasureImage, components: readonly Component[], scene: Scene): Settings {
  const nearest = Math.min(...components.flatMap((a, i) => components.slice(i + 1).map(b => Math.hypot(a.x - b.x, a.y - b.y)))) / scene.fwhmPx
  return { harmonics: nearest > 1.8 ? 4 : nearest > 1.3 ? 3 : nearest > 1 ? 2 : 0, radius: reachOf(scene, image), spacing: 1 }
}

/** The final fit. */
export function refit(image: MeasureImage, start: readonly Component[], scene: Scene, noise: NoiseModel, settings = settingsFor(image, start, scene)): Solved {
  return fitComponents(image, start, { fwhmPx: scene.fwhmPx, background: scene.background, noise, ...settings })
}

/**
 * How much the answer depends on how the form of the star image is set up: root mean square of the changes when it may have
 * more or less angular form, coarser knots, or fewer pixels. Nothing that the scatter of frames could show.
 */
export function settingErrors(image: MeasureImage, solved: Solved, scene: Scene, noise: NoiseModel): RelativeErr[] {
  const { components } = solved.state
  const own = settingsFor(image, components, scene)
  const others: Settings[] = [
    { ...own, harmonics: own.harmonics === 0 ? 2 : own.harmonics - 1 }, { ...own, spacing: 1.3 }, { ...own, radius: Math.max(6, 0.7 * own.radius) },
  ]
  const answers = others.flatMap((settings) => {
    try {
      return [refit(image, components, scene, noise, settings).state.components]
    }
    catch (reason) {
      if (reason instanceof MeasureError) return []
      throw reason
    }
  })
  return components.slice(1).map((star, j) => {
    const centre = relativeTo(components[0]!, star)
    const rms = (away: (one: Relative) => number) => Math.sqrt(answers.reduce((sum, one) => sum + away(relativeTo(one[0]!, one[j + 1]!)) ** 2, 0) / Math.max(1, answers.length))
    return { sepPxErr: rms(one => one.sepPx - centre.sepPx), paDegErr: rms(one => angleDifference(one.paDeg, centre.paDeg)), dMagErr: rms(one => one.dMag - centre.dMag) }
  })
}

/** Independent errors together. */
export function added(a: readonly RelativeErr[], b: readonly RelativeErr[]): RelativeErr[] {
  return a.map((one, j) => ({ sepPxErr: Math.hypot(one.sepPxErr, b[j]!.sepPxErr), paDegErr: Math.hypot(one.paDegErr, b[j]!.paDegErr), dMagErr: Math.hypot(one.dMagErr, b[j]!.dMagErr) }))
}

/** Values of all components against the first, with errors from answers of blocks of time. */
export function valuesWith(components: readonly Component[], errors: readonly RelativeErr[]): PairValues[] {
  return components.slice(1).map((star, j) => ({ ...relativeTo(components[0]!, star), ...errors[j]! }))
}

/** Errors from block stacks; those of the fit alone, widened by its misfit, where there are too few blocks. */
export function errorsOf(solved: Solved, blocks: readonly MeasureImage[]): { errors: RelativeErr[], answers: Component[][] } {
  const answer = responseOf(solved)
  const answers = blocks.map(answer)
  if (answers.length >= LEAST_BLOCKS) return { errors: bootstrapErrors(answers, solved.state.components), answers }
  return { errors: formalErrors(solved), answers }
}

/** The mean answer of some blocks. */
export function meanAnswer(answers: readonly Component[][]): Component[] {
  return answers[0]!.map((_, j) => ({
    x: answers.reduce((sum, block) => sum + block[j]!.x, 0) / answers.length,
    y: answers.reduce((sum, block) => sum + block[j]!.y, 0) / answers.length,
    flux: answers.reduce((sum, block) => sum + block[j]!.flux, 0) / answers.length,
  }))
}

function formalErrors({ state, model, factor, chiSquared }: Solved): RelativeErr[] {
  const n = model.parameters
  const stars = state.components.length
  const variance = (a: number) => {
    // Column a of the inverse by two triangular solves; its a-th entry is the variance.
    const x = new Float64Array(n)
    x[a] = 1
    for (let i = 0; i < n; i++) {
      for (let k = 0; k < i; k++) x[i]! -= factor[i * n + k]! * x[k]!
      x[i]! /= factor[i * n + i]!
    }
    return x.reduce((sum, value) => sum + value * value, 0) * Math.max(1, chiSquared)
  }
  return state.components.slice(1).map((star, j) => {
    const { sepPx } = relativeTo(state.components[0]!, star)
    const place = Math.sqrt(Math.max(variance(0) + variance(2 * (j + 1)), variance(1) + variance(2 * (j + 1) + 1)))
    return { sepPxErr: place, paDegErr: place / sepPx * 180 / Math.PI, dMagErr: 1.0857 * Math.sqrt(variance(2 * stars + j)) / star.flux }
  })
}

/** How faint a companion could be and stand out, at some distances from a star that shows none. */
export function limitsOf(image: MeasureImage, scene: Scene): { sepPx: number, dMag: number }[] {
  const { brightest: { x, y }, fwhmPx, background, sky } = scene
  const profile = radialMedian(image, x, y)
  const away = new Float32Array(image.samples.length)
  for (let py = 0; py < image.height; py++) {
    for (let px = 0; px < image.width; px++) {
      away[py * image.width + px] = Math.abs(image.samples[py * image.width + px]! - profile[Math.min(profile.length - 1, Math.round(Math.hypot(px - x, py - y)))]!)
    }
  }
  const spread = radialMedian({ ...image, samples: away }, x, y)
  const peak = profile[0]! - background
  const area = Math.max(1, Math.PI * (fwhmPx / 2) ** 2)
  return [1, 1.5, 2, 3, 4, 6, 8].map(widths => widths * fwhmPx).filter(sepPx => sepPx < spread.length - 1).map((sepPx) => {
    const scatter = Math.max(1.4826 * spread[Math.round(sepPx)]!, sky / Math.sqrt(area))
    return { sepPx, dMag: Math.max(0, -2.5 * Math.log10(Math.min(1, LEAST_SIGNIFICANCE * scatter / Math.max(peak, 1e-30)))) }
  })
}
