/** Restoration of the stacks of one run: measures what they hold, makes plans, carries them out. */
import type { Optics, Part, StackImage } from '../api'
import { decompose } from '../restore/atrous'
import { estimateBlur, motionOf, type Blur, type Graded } from '../restore/blur'
import type { Pause, RadialCurve } from '../restore/convolve'
import { overshootOf } from '../restore/guards'
import { makePlan, ownNoise, robustSigma, type Measured } from '../restore/plan'
import { againstTelescope, profileTransfer, radialProfile } from '../restore/psf'
import { reportOf } from '../restore/report'
import { restore, WAVELET_REACH } from '../restore/restore'
import { radialSpectra, type RadialSpectra } from '../restore/spectra'
import { halvesNoise, stackLuminance } from '../score/figures'
import { createScorer, emptyScore } from '../score/scorer'
import { lambdaOverDPx } from '../../shared/optics'
import { canonicalJson } from '../../shared/recipe/canonical'
import { restoringMethod, type Recipe } from '../../shared/schemas/recipe'
import type { RestorePlan } from '../../shared/schemas/restoration'
import type { ShiftTable } from './columns'
import type { Ladder } from './ladder-pass'
import type { Stacker } from './stacker'
import type { Surveyed } from './survey-frames'

/** Shares of the frames whose stacks are compared for the air; beside all of them. */
const COMPARED = [0.05, 0.1, 0.2, 0.35, 0.5]
/** Fewest frames in a stack that is compared. */
const FEWEST = 4
/** Wavelengths of the colour planes over that of the optics: usual filters, common practice, no source. */
const COLOURS = [1.13, 1, 0.85] as const
const SCALES = 6
/** Samples that are restored within a screen refresh or two, while the slider is dragged. */
const LIVE = 400_000
/** Largest side of what is measured on: of larger images the middle. */
const MIDDLE = 1024

export interface RestorerInput { stacker: Stacker, ladder: Ladder, surveyed: Surveyed, optics: Optics | null, shifts: ShiftTable }

export class Restorer {
  readonly #in: RestorerInput
  #air: Blur | null | undefined
  #measured: { count: number, value: Measured } | null = null
  #plan: { key: string, plan: RestorePlan } | null = null

  constructor(input: RestorerInput) { this.#in = input }

  /** The numbers that a recipe's restoration comes to for the stack of `count` frames. With `near`, those of the last count will do. */
  async plan(count: number, how: Recipe['restore'], pause: Pause, near = false): Promise<RestorePlan> {
    if (restoringMethod(how.method, this.#in.surveyed.survey.kind) === 'nothing') return makePlan(how, { kind: this.#in.surveyed.survey.kind, share: 1, planes: [] })
    const at = near && this.#measured ? this.#measured.count : count
    const key = `${at} ${canonicalJson(how)}`
    if (this.#plan?.key === key) return this.#plan.plan
    if (this.#measured?.count !== at) this.#measured = { count: at, value: await this.#measure(at, pause) }
    const plan = makePlan(how, this.#measured.value)
    this.#plan = { key, plan }
    return plan
  }

  /**
   * A stack restored, with the figures of the guards; the stack itself where nothing is restored. While a hand is on the slider
   * only what is quick is done, and the rest waits for the hand to rest. With `part` that part is restored, and no more.
   */
  async restored(image: StackImage, how: Recipe['restore'], pause: Pause, dragging: boolean, part: Part | null = null): Promise<StackImage> {
    const { width, height, planes } = image
    if (dragging && width * height * planes > LIVE) return image
    const plan = await this.plan(image.count, how, pause, dragging)
    if (plan.method === 'nothing') return { ...image, restoration: reportOf(plan, null, null, 0) }
    if (dragging && plan.method !== 'wavelets') return image
    if (part) return { ...image, samples: await this.#inPart(image, plan, part, pause), restored: true }
    const { samples, rounds } = await restore(image.samples, width, height, planes, plan, pause)
    if (dragging) return { ...image, samples, restored: true }
    const w = Math.min(MIDDLE, width)
    const h = Math.min(MIDDLE, height)
    const [before, after] = [image.samples, samples].map(each => cutOf(each, planes, width, height, (width - w) >> 1, (height - h) >> 1, w, h)) as [Float32Array, Float32Array]
    const overshoot = overshootOf(before, after, w, h, planes, this.#in.surveyed.survey.form === 'disc')
    return { ...image, samples, restored: true, restoration: reportOf(plan, overshoot, await this.#noiseGain(image.count, plan, pause), rounds) }
  }

  /** The samples with one part of the picture restored; a margin around it is worked on and thrown away, so that the part comes out as in the whole. */
  async #inPart({ samples, width, height, planes }: StackImage, plan: RestorePlan, part: Part, pause: Pause): Promise<Float32Array> {
    const x0 = Math.max(0, part.x - WAVELET_REACH)
    const y0 = Math.max(0, part.y - WAVELET_REACH)
    const w = Math.min(width, part.x + part.width + WAVELET_REACH) - x0
    const h = Math.min(height, part.y + part.height + WAVELET_REACH) - y0
    const { samples: sharper } = await restore(cutOf(samples, planes, width, height, x0, y0, w, h), w, h, planes, plan, pause)
    const out = samples.slice()
    for (let p = 0; p < planes; p++) {
      for (let y = part.y; y < part.y + part.height; y++) {
        const from = (p * h + y - y0) * w + part.x - x0
        out.set(sharper.subarray(from, from + part.width), (p * height + y) * width + part.x)
      }
    }
    return out
  }

  /** Signal and noise by frequency of a rung's stack, of the green plane where there are colours; null without halves. */
  spectra(rung: number): RadialSpectra | null {
    const halves = this.#in.stacker.halves(rung)
    return halves && this.#spectra(halves, this.#in.ladder.planes === 3 ? 1 : 0)
  }

  /** The transfer of a star over the telescope's own (of the green plane); null for other targets. */
  async star(count: number, pause: Pause): Promise<RadialCurve | null> {
    if (this.#measured?.count !== count) this.#measured = { count, value: await this.#measure(count, pause) }
    const { planes } = this.#measured.value
    return planes[Math.min(1, planes.length - 1)]!.star
  }

  /** What the air does to an extended target, as measured; null where it cannot be told. */
  air(pause: Pause): Promise<Blur | null> { return this.#blur(pause) }

  async #measure(count: number, pause: Pause): Promise<Measured> {
    const { stacker, ladder: { planes, width, height }, surveyed, shifts } = this.#in
    const frames = shifts.dx.length
    const star = surveyed.survey.kind === 'star'
    const rung = stacker.rungBelow(count)
    const fewer = Math.min(1, stacker.countOf(rung) / Math.max(1, count))
    const halves = stacker.halves(rung)
    const air = star ? null : await this.#blur(pause)
    const image = await stacker.stack(count)
    const list: Measured['planes'] = []
    for (let p = 0; p < planes; p++) {
      const spectra = halves ? this.#spectra(halves, p) : null
      if (spectra) for (let i = 0; i < spectra.noise.length; i++) spectra.noise[i]! *= fewer
      list.push({
        spectra, floor: this.#floor(image, p), spread: halves && this.#spread(halves, p, fewer), scaleNoise: halves ? this.#scaleNoise(halves, p, Math.sqrt(fewer)) : ownNoise(image.samples.subarray(p * width * height, (p + 1) * width * height), width, height),
        blur: air && { ...air, apertureOverR0: air.apertureOverR0 * (planes === 3 ? colourFactor(p) : 1), lambdaPx: air.lambdaPx * (planes === 3 ? COLOURS[p]! : 1) },
        star: star ? this.#star(image, p) : null,
      })
      await pause()
    }
    return { kind: surveyed.survey.kind, share: count / Math.max(1, frames), planes: list }
  }

  /** D/r0 from the stacks of few and of all frames, of the green plane where there are colours. */
  async #blur(pause: Pause): Promise<Blur | null> {
    if (this.#air !== undefined) return this.#air
    const { stacker, ladder: { counts, planes }, optics, shifts } = this.#in
    const frames = shifts.dx.length
    const wanted = [...COMPARED.map(share => share * frames), stacker.ranked]
    const rungs = new Set(wanted.map(n => counts.reduce((best, count, k) => (Math.abs(count - n) < Math.abs(counts[best]! - n) ? k : best), 0)))
    const graded: Graded[] = []
    for (const rung of rungs) {
      const halves = counts[rung]! >= FEWEST ? stacker.halves(rung) : null
      if (!halves) continue
      graded.push({ share: counts[rung]! / frames, spectra: this.#spectra(halves, planes === 3 ? 1 : 0) })
      await pause()
    }
    const moved: { time: number, dx: number, dy: number }[] = []
    shifts.setAside.forEach((code, time) => { if (code === 0) moved.push({ time, dx: shifts.dx[time]!, dy: shifts.dy[time]! }) })
    this.#air = estimateBlur(graded, optics ? lambdaOverDPx(optics) : null, motionOf(moved))
    return this.#air
  }

  #spectra(halves: [Float32Array, Float32Array], plane: number): RadialSpectra {
    const { width, height } = this.#in.ladder
    const size = width * height
    const [a, b] = halves.map(half => half.subarray(plane * size, (plane + 1) * size)) as [Float32Array, Float32Array]
    return radialSpectra(a, b, width, height)
  }

  #scaleNoise(halves: [Float32Array, Float32Array], plane: number, factor: number): number[] {
    const { width, height } = this.#in.ladder
    const size = width * height
    const w = Math.min(MIDDLE, width)
    const h = Math.min(MIDDLE, height)
    const [a, b] = halves.map(half => cutOf(half.subarray(plane * size, (plane + 1) * size), 1, width, height, (width - w) >> 1, (height - h) >> 1, w, h)) as [Float32Array, Float32Array]
    return decompose(a.map((value, i) => 0.5 * factor * (value - b[i]!)), w, h, SCALES).details.map(robustSigma)
  }

  /** Rms of half the difference of the halves; by the root of `fewer` for a stack of more frames. */
  #spread(halves: [Float32Array, Float32Array], plane: number, fewer: number): number {
    const size = this.#in.ladder.width * this.#in.ladder.height
    let square = 0
    for (let i = plane * size; i < (plane + 1) * size; i++) square += 0.25 * (halves[0][i]! - halves[1][i]!) ** 2
    return Math.sqrt(square / size * fewer)
  }

  /** Level of the dark sky of a plane: what a twentieth of the samples are below; 0 where the target fills the field. */
  #floor({ samples, width, height }: StackImage, plane: number): number {
    if (this.#in.surveyed.survey.form === 'field') return 0
    const sorted = samples.slice(plane * width * height, (plane + 1) * width * height).sort()
    return sorted[Math.floor(0.05 * sorted.length)]!
  }

  #star(image: StackImage, plane: number): RadialCurve | null {
    const { surveyed: { score: plan }, optics } = this.#in
    const { width, height, planes, samples } = image
    const size = width * height
    const score = emptyScore()
    createScorer({ ...plan, noise: 0, guide: null }).score(stackLuminance(samples, planes, false, width, height), 0, score)
    if (score.empty || !(score.flux > 0)) return null
    const one = samples.subarray(plane * size, (plane + 1) * size)
    const reach = Math.min(plan.windowPx / 2, score.x, score.y, width - 1 - score.x, height - 1 - score.y)
    if (reach < 6) return null
    const level = levelOf(one)
    const profile = radialProfile(one, width, height, score.x, score.y, level, reach)
    return againstTelescope(profileTransfer(profile), optics && { ...optics, wavelengthNm: optics.wavelengthNm * (planes === 3 ? COLOURS[plane]! : 1) })
  }

  /** Scatter of the restored halves over that of the halves, on the middle of the image. */
  async #noiseGain(count: number, plan: RestorePlan, pause: Pause): Promise<number | null> {
    const { stacker, ladder: { width, height, planes } } = this.#in
    const halves = stacker.halves(stacker.rungBelow(count))
    if (!halves) return null
    const w = Math.min(width, 208)
    const h = Math.min(height, 208)
    const cut = (half: Float32Array) => cutOf(half, planes, width, height, (width - w) >> 1, (height - h) >> 1, w, h)
    const [a, b] = halves.map(cut) as [Float32Array, Float32Array]
    const sharper = [await restore(a, w, h, planes, plan, pause), await restore(b, w, h, planes, plan, pause)].map(({ samples }) => stackLuminance(samples, planes, false, w, h))
    const before = halvesNoise(stackLuminance(a, planes, false, w, h), stackLuminance(b, planes, false, w, h))
    return before > 0 ? halvesNoise(sharper[0]!, sharper[1]!) / before : null
  }
}

/** (λ / λ0)^(−6/5) of the colour planes: r0 grows with λ^(6/5). */
const colourFactor = (plane: number): number => [0.8636, 1, 1.2153][plane]!

/** Level of the sky about a star: the median of all samples. */
const levelOf = (image: Float32Array): number => Float32Array.from(image).sort()[image.length >> 1]!

function cutOf(samples: Float32Array, planes: number, width: number, height: number, x0: number, y0: number, w: number, h: number): Float32Array {
  const out = new Float32Array(planes * w * h)
  for (let p = 0; p < planes; p++) for (let y = 0; y < h; y++) out.set(samples.subarray((p * height + y0 + y) * width + x0, (p * height + y0 + y) * width + x0 + w), (p * h + y) * w)
  return out
}
