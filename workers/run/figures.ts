import type { Optics, StackImage } from '../api'
import { halvesNoise, stackFigures, stackLuminance } from '../score/figures'
import type { StackFigures } from '../../shared/schemas/run'
import type { Stacker } from './stacker'
import type { Surveyed } from './survey-frames'

/** Figures of stacks of one run; the noise comes from half stacks, so that nothing that was aligned to itself is counted as signal. */
export class Figurer {
  readonly #stacker: Stacker
  readonly #surveyed: Surveyed
  readonly #optics: Optics | null
  #noise = new Map<number, number>()

  constructor(stacker: Stacker, surveyed: Surveyed, optics: Optics | null) {
    this.#stacker = stacker
    this.#surveyed = surveyed
    this.#optics = optics
  }

  of(image: StackImage): StackFigures {
    return this.#figures(image, image.count / Math.max(1, this.#stacker.ranked), this.#noiseOf(image.count))
  }

  /** Figures of the plain unregistered average of `frames` frames; its noise is that of one frame over their root. */
  ofAverage(image: StackImage, frames: number): StackFigures {
    return this.#figures(image, 1, this.#surveyed.survey.noise / Math.sqrt(Math.max(1, frames)))
  }

  #figures({ samples, planes, count }: StackImage, fraction: number, noise: number): StackFigures {
    const { plan, score } = this.#surveyed
    const mosaic = planes === 1 && plan.mosaic !== 'none'
    return stackFigures({ stack: samples, planes, mosaic, noise, count, fraction, plan: score, optics: this.#optics })
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
    const { width, height } = this.#surveyed.plan
    const planes = halves[0].length === width * height ? 1 : 3
    const [a, b] = halves.map(half => stackLuminance(half, planes, false, width, height)) as [Float32Array, Float32Array]
    return halvesNoise(a, b)
  }
}
