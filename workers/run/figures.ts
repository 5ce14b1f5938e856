import type { Optics, StackImage } from '../api'
import { quantileInPlace } from '../score/blocks'
import { laplacianVariance } from '../score/measures'
import type { StackFigures } from '../../shared/schemas/run'
import type { Stacker } from './stacker'
import type { Surveyed } from './survey-pass'

/** Figures of stacks of one run; the noise comes from half stacks, so that nothing that was aligned to itself is counted as signal. */
export class Figurer {
  readonly #stacker: Stacker
  readonly #surveyed: Surveyed
  #noise = new Map<number, number>()

  constructor(stacker: Stacker, surveyed: Surveyed, _optics: Optics | null) {
    this.#stacker = stacker
    this.#surveyed = surveyed
  }

  of(image: StackImage): StackFigures {
    const noise = this.#noiseOf(image.count)
    return this.#figures(image, image.count / Math.max(1, this.#stacker.ranked), noise)
  }

  /** Figures of the plain unregistered average of `frames` frames; its noise is that of one frame over their root. */
  ofAverage(image: StackImage, frames: number): StackFigures {
    return this.#figures(image, 1, this.#surveyed.survey.noise / Math.sqrt(Math.max(1, frames)))
  }

  #figures({ samples, width, height, planes, count }: StackImage, fraction: number, noise: number): StackFigures {
    const luminance = planes === 1 ? samples : Float32Array.from({ length: width * height }, (_, i) => 0.25 * (samples[i]! + 2 * samples[i + width * height]! + samples[i + 2 * width * height]!))
    const sorted = luminance.slice()
    const background = quantileInPlace(sorted, sorted.length, 0.2)
    let peak = 0
    let flux = 0
    for (const value of luminance) {
      if (value - background > peak) peak = value - background
      flux += value - background
    }
    const sharpness = flux > 0 ? laplacianVariance(luminance, width, height) * width * height / (flux * flux) : 0
    return { count, fraction, sharpness, noise, peak, signalToNoise: noise > 0 ? peak / noise : 0, fwhmPx: null, fwhmErrPx: null, strehl: null }
  }

  /** Noise of the mean of `count` frames: from the halves of the rung below, scaled by the root of the counts. */
  #noiseOf(count: number): number {
    const rung = this.#stacker.rungBelow(count)
    const known = this.#noise.get(rung)
    const at = this.#stacker.countOf(rung)
    const noise = known ?? this.#measure(rung) ?? this.#surveyed.survey.noise / Math.sqrt(Math.max(1, at))
    this.#noise.set(rung, noise)
    return noise * Math.sqrt(at / Math.max(1, count))
  }

  /** Half the robust scatter of the difference of two half stacks; null where there are no halves. */
  #measure(rung: number): number | null {
    const halves = this.#stacker.halves(rung)
    if (!halves) return null
    const difference = halves[0].map((value, i) => value - halves[1][i]!)
    const middle = quantileInPlace(difference.slice(), difference.length, 0.5)
    const off = difference.map(value => Math.abs(value - middle))
    return 1.4826 * quantileInPlace(off, off.length, 0.5) / 2
  }
}
