import type { StackImage } from '../api'
import type { Samples } from '../decode/types'
import type { Kernels } from '../kernels/index'
import type { CaptureFacts } from '../../shared/schemas/capture'

/**
 * The exact sum of frames as they are stored, without any repair. Integer samples are added as integers in
 * 32 bits and moved to doubles before they could overflow; float samples as fixed point (value × scale,
 * rounded), so that the order of the frames does not matter. Samples that are not finite count as 0.
 */
export class AverageSum {
  readonly #size: number
  readonly #integers: boolean
  readonly #kernels: Kernels
  readonly #small: Int32Array
  #large: Float64Array
  readonly #room: number
  readonly #scale: number
  #pending = 0

  /**
   * @param scale multiplier of float samples; unused for integers
   * @param kernels with room for the 32-bit sum and one frame
   */
  constructor(size: number, like: Samples, scale: number, kernels: Kernels) {
    this.#kernels = kernels
    this.#scale = scale
    this.#size = size
    this.#integers = !(like instanceof Float32Array)
    this.#small = kernels.ints(this.#integers ? size : 0)
    this.#large = new Float64Array(size)
    this.#room = like instanceof Uint8Array ? 2 ** 24 : 2 ** 16
  }

  add(samples: Samples, offset: number, count: number): void {
    for (let i = 0; i < count; i++) {
      const at = offset + i * this.#size
      if (this.#integers) this.#addIntegers(samples, at)
      else this.#addFloats(samples as Float32Array, at)
    }
  }

  #addIntegers(samples: Samples, at: number): void {
    this.#kernels.addSamples(samples, at, this.#size, this.#small)
    if (++this.#pending >= this.#room) this.#empty()
  }

  #addFloats(samples: Float32Array, at: number): void {
    const large = this.#large
    const scale = this.#scale
    for (let k = 0; k < large.length; k++) {
      const value = Math.round(samples[at + k]! * scale)
      if (Number.isFinite(value)) large[k]! += value
    }
  }

  #empty(): void {
    for (let k = 0; k < this.#small.length; k++) this.#large[k]! += this.#small[k]! >>> 0
    this.#small.fill(0)
    this.#pending = 0
  }

  /** The sum in fixed point, see `averageOf`; what comes after is added from zero. */
  take(): Float64Array {
    this.#empty()
    const sum = this.#large
    this.#large = new Float64Array(this.#size)
    return sum
  }
}

/**
 * The fixed point of the average, from that of the stacks: 1 for integers; for floats eight bits finer, which
 * leaves room for 2^22 frames in a double.
 */
export const averageScale = (facts: CaptureFacts, stackScale: number): number => facts.sampleKind === 'float32' ? stackScale * 256 : 1

/** The mean of `count` frames from a sum of AverageSum. */
export function averageOf(sum: Float64Array, count: number, scale: number): Float32Array {
  const mean = new Float32Array(sum.length)
  const by = count * scale
  for (let i = 0; i < mean.length; i++) mean[i] = sum[i]! / by
  return mean
}

/** The plain unregistered mean of all readable frames as stored; a mosaic stays a mosaic (one plane). */
export function averageImage(facts: CaptureFacts, { averageSum, averageCount }: { averageSum: Float64Array, averageCount: number }, stackScale: number): StackImage {
  const samples = averageOf(averageSum, averageCount, averageScale(facts, stackScale))
  return { width: facts.width, height: facts.height, planes: facts.planes, samples, count: averageCount, restored: false }
}
