/**
 * The first look: frames spread over the capture → what the target is, how noisy, how finely sampled, where, and
 * whether there is anything at all.
 */
import { createRegistrar, emptyShift } from '../register/registrar'
import { blurNoiseGain, createWindowBlur } from './blur'
import { createBlocks, fillBlocks, quantileInPlace } from './blocks'
import { quadraticPeak } from './measures'
import { frameNoise } from './noise'
import { makeScorePlan } from './plan'
import { chooseExtendedBlur } from './scale'
import { createScorer, emptyScore } from './scorer'
import { findSignal } from './signal'
import type { FrameScore, Survey, TargetForm } from './types'

const CHOOSE = { score: { rankBy: 'peak' as const, blurPx: null }, register: { method: 'correlation' as const, windowPx: null, centre: null, referenceFraction: 0.05, refineRounds: 2, patches: 'never' as const, patchPlaces: null, alignColours: false } }

/** Frames that tell the noise: each gives it from some ten thousand samples. */
const NOISE_FRAMES = 16

/**
 * @param frames luminance of 16-64 frames spread over the capture, width × height each
 * @param fromMosaic whether the luminance was made from a mosaic (neighbours then share noise)
 */
export function survey(frames: Float32Array[], width: number, height: number, fromMosaic = false): Survey {
  const every = Math.max(1, Math.floor(frames.length / NOISE_FRAMES))
  const noise = median(frames.filter((_, i) => i % every === 0).map(frame => frameNoise(frame, width, height, fromMosaic ? 3 : 1)))
  const shape = targetForm(frames, width, height)
  const form = shape.form
  const signal = findSignal(frames, width, height, noise)
  const windowPx = form === 'field' ? fieldWindow(width, height) : compactWindow(frames, width, height, form)
  const first: Survey = {
    kind: form === 'star' ? 'star' : 'extended',
    form,
    noise,
    background: form === 'field' ? 0 : shape.background,
    detailPx: null,
    blurPx: form === 'star' ? 1 : 1.5,
    windowPx,
    centre: { x: (width - 1) / 2, y: (height - 1) / 2 },
    noSignal: !signal.found,
    noSignalText: signal.text,
    reference: frames[0]!,
    refX: (width - 1) / 2,
    refY: (height - 1) / 2,
  }
  if (form === 'star') {
    first.detailPx = starDetail(frames, width, height, first)
    first.blurPx = starBlur(frames, width, height, first)
  }
  else {
    const scores = scoreAll(frames, width, height, first)
    first.blurPx = chooseExtendedBlur(frames, width, height, scores, form === 'disc' ? Math.ceil(0.8 * windowPx) : windowPx)
  }
  return withReference(frames, width, height, first)
}

function median(values: number[]): number {
  const sorted = [...values].sort((a, b) => a - b)
  const n = sorted.length
  return n === 0 ? 0 : 0.5 * (sorted[(n - 1) >> 1]! + sorted[n >> 1]!)
}

/** Star, disc or field, from how area falls with level and whether the borders are bright. */
function targetForm(frames: Float32Array[], width: number, height: number): { form: TargetForm, background: number } {
  const blocks = createBlocks(width, height)
  const { columns, rows, means } = blocks
  const sorted = new Float32Array(means.length)
  const ratios: number[] = []
  const borders: number[] = []
  const areas: number[] = []
  const backgrounds: number[] = []
  for (const frame of frames) {
    fillBlocks(frame, width, blocks)
    sorted.set(means)
    const background = quantileInPlace(sorted, sorted.length, 0.2)
    let top = 0
    for (const v of means) if (v > top) top = v
    let wide = 0
    let narrow = 0
    for (const v of means) {
      if (v > background + 0.25 * (top - background)) wide++
      if (v > background + 0.7 * (top - background)) narrow++
    }
    let border = 0
    const bright = background + 0.25 * (top - background)
    for (let c = 0; c < columns; c++) border += Number(means[c]! > bright) + Number(means[(rows - 1) * columns + c]! > bright)
    for (let r = 0; r < rows; r++) border += Number(means[r * columns]! > bright) + Number(means[r * columns + columns - 1]! > bright)
    ratios.push(narrow / Math.max(1, wide))
    areas.push(wide / means.length)
    borders.push(border / (2 * (columns + rows)))
    backgrounds.push(background)
  }
  const background = median(backgrounds)
  if (median(borders) > 0.15) return { form: 'field', background }
  return { form: median(ratios) > 0.35 && median(areas) > 0.01 ? 'disc' : 'star', background }
}

function powerAtLeast(value: number): number {
  let n = 32
  while (n < value && n < 512) n *= 2
  return n
}

/** Largest power of two that (nearly) fits into the frame, 32 to 256. */
function fieldWindow(width: number, height: number): number {
  let n = 32
  while (2 * n <= 1.1 * Math.min(width, height) && n < 256) n *= 2
  return n
}

/** Twice the diameter of a star's image down to a sixteenth of its block maximum, or 1.25 times a disc, as a power of two. */
function compactWindow(frames: Float32Array[], width: number, height: number, form: TargetForm): number {
  const blocks = createBlocks(width, height)
  const { columns, rows, means, side } = blocks
  const sorted = new Float32Array(means.length)
  const spans: number[] = []
  for (const frame of frames) {
    fillBlocks(frame, width, blocks)
    sorted.set(means)
    const background = quantileInPlace(sorted, sorted.length, 0.3)
    let top = -Infinity
    for (const v of means) if (v > top) top = v
    const threshold = background + 0.06 * (top - background)
    let count = 0
    let sx = 0
    let sy = 0
    for (let i = 0; i < columns * rows; i++) {
      if (means[i]! < threshold) continue
      count++
      sx += i % columns
      sy += Math.floor(i / columns)
    }
    let second = 0
    for (let i = 0; i < columns * rows; i++) {
      if (means[i]! < threshold) continue
      const dx = i % columns - sx / count
      const dy = Math.floor(i / columns) - sy / count
      second += dx * dx + dy * dy
    }
    // A filled circle of diameter d has a mean squared radius of d²/8.
    spans.push(side * Math.sqrt(8 * second / Math.max(1, count)))
  }
  const span = median(spans)
  return form === 'star' ? Math.min(powerAtLeast(2 * span), fieldWindow(width, height)) : powerAtLeast(1.25 * span)
}

/** Width of the sharpest detail of a star: from the curvature of the brightest speckle in the sharpest frames. */
function starDetail(frames: Float32Array[], width: number, height: number, first: Survey): number | null {
  const soft = 0.7
  const side = Math.min(64, width, height)
  const blur = createWindowBlur(soft, side, side)
  const smooth = new Float32Array(side * side)
  const scorer = createScorer(makeScorePlan({ ...first, blurPx: soft }, CHOOSE, width, height))
  const score = emptyScore()
  const peak = { x: 0, y: 0, value: 0 }
  const widths: { peak: number, fwhm: number }[] = []
  for (const frame of frames) {
    scorer.score(frame, 0, score)
    if (score.empty || score.outOfField) continue
    const x0 = Math.max(0, Math.min(width - side, Math.round(score.x) - (side >> 1)))
    const y0 = Math.max(0, Math.min(height - side, Math.round(score.y) - (side >> 1)))
    blur.blur(frame, width, height, x0, y0, side, side, smooth)
    quadraticPeak(smooth, side, side, peak)
    const i = Math.round(peak.y) * side + Math.round(peak.x)
    const level = score.background
    const a = Math.log(Math.max(1e-9, smooth[i]! - level))
    const neighbours = [i - 1, i + 1, i - side, i + side].map(k => Math.log(Math.max(1e-9, (smooth[k] ?? level) - level)))
    // ln of a Gaussian falls by 1/(2 sigma²) from the centre to one px, wherever the centre lies, on average of both sides.
    const fall = a - 0.25 * (neighbours[0]! + neighbours[1]! + neighbours[2]! + neighbours[3]!)
    if (fall > 0) widths.push({ peak: score.peak, fwhm: 2.3548 * Math.sqrt(Math.max(0.3, 0.5 / fall - soft * soft)) })
  }
  widths.sort((p, q) => q.peak - p.peak)
  const best = widths.slice(0, Math.max(1, Math.ceil(widths.length / 4)))
  return best.length > 0 ? median(best.map(w => w.fwhm)) : null
}

/**
 * A star's smoothing: a fifth of the detail's width where the signal is strong (the peak and its place are then as
 * sharp as the optics), up to the matched width where noise would decide.
 */
function starBlur(frames: Float32Array[], width: number, height: number, first: Survey): number {
  const fwhm = first.detailPx ?? 3
  const scorer = createScorer(makeScorePlan({ ...first, blurPx: 0.2 * fwhm }, CHOOSE, width, height))
  const score = emptyScore()
  const ratios: number[] = []
  for (const frame of frames) {
    scorer.score(frame, 0, score)
    ratios.push(score.peak * score.flux / (first.noise * blurNoiseGain(0.2 * fwhm)))
  }
  const strength = median(ratios)
  const faint = Math.min(1, Math.max(0, (40 - strength) / 30))
  return roundTenth(Math.min(4, Math.max(0.5, fwhm * (0.2 + 0.22 * faint))))
}

const roundTenth = (value: number): number => Math.round(value * 10) / 10

/** Provisional reference: the sharpest quarter of the frames, put on top of each other by whole pixels. */
function withReference(frames: Float32Array[], width: number, height: number, first: Survey): Survey {
  const scores = scoreAll(frames, width, height, { ...first, reference: frames[0]! })
  const sharpness = (s: FrameScore) => (s.empty || s.outOfField ? -Infinity : first.form === 'star' ? s.peak : s.laplacian)
  const order = scores.map((_, i) => i).sort((a, b) => sharpness(scores[b]!) - sharpness(scores[a]!) || a - b)
  const best = order[0] ?? 0
  const lead = frames[best]!
  const centre = first.form === 'field' ? first.centre : { x: scores[best]!.x, y: scores[best]!.y }
  const usable = order.filter(i => sharpness(scores[i]!) > -Infinity).slice(0, Math.max(4, Math.ceil(frames.length / 4)))
  const registrar = createRegistrar({
    width, height, method: 'correlation', form: first.form, windowPx: first.windowPx, blurPx: first.blurPx, noise: first.noise,
    reference: lead, refX: centre.x, refY: centre.y,
  })
  const guided = first.form === 'field' ? scoreAll(frames, width, height, { ...first, reference: lead }) : scores
  const sum = new Float64Array(width * height)
  const shift = emptyShift()
  let count = 0
  for (const i of usable) {
    registrar.register(frames[i]!, guided[i]!.x, guided[i]!.y, shift)
    if (!shift.sure && i !== best) continue
    addShifted(frames[i]!, width, height, Math.round(shift.dx), Math.round(shift.dy), sum)
    count++
  }
  const reference = new Float32Array(width * height)
  for (let i = 0; i < reference.length; i++) reference[i] = count > 0 ? sum[i]! / count : lead[i]!
  return { ...first, reference, centre: { x: Math.round(centre.x), y: Math.round(centre.y) }, refX: centre.x, refY: centre.y }
}

function scoreAll(frames: Float32Array[], width: number, height: number, first: Survey): FrameScore[] {
  const scorer = createScorer(makeScorePlan(first, CHOOSE, width, height))
  return frames.map((frame) => {
    const score = emptyScore()
    scorer.score(frame, 0, score)
    return score
  })
}

/** Adds a frame moved by whole pixels; what the move leaves open repeats the frame's edge. */
function addShifted(frame: Float32Array, width: number, height: number, dx: number, dy: number, sum: Float64Array): void {
  for (let y = 0; y < height; y++) {
    const row = Math.min(height - 1, Math.max(0, y - dy)) * width
    for (let x = 0; x < width; x++) sum[y * width + x]! += frame[row + Math.min(width - 1, Math.max(0, x - dx))]!
  }
}
