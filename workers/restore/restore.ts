import type { RestorePlan } from '../../shared/schemas/restoration'
import type { Pause } from './convolve'
import { filterPlane, lucyPlane } from './deconvolve'
import { sharpenPlane } from './wavelets'

export interface Restored {
  /** Planar, like the input. */
  samples: Float32Array
  /** Richardson-Lucy: rounds made; 0 otherwise. */
  rounds: number
}

/**
 * Carries out a plan on planar samples (planes × height × width); the input is not changed. `pause` is awaited between pieces of a
 * few ten milliseconds and may throw to end the work.
 */
export async function restore(samples: Float32Array, width: number, height: number, planes: number, plan: RestorePlan, pause: Pause): Promise<Restored> {
  const size = width * height
  const out = new Float32Array(samples)
  let rounds = 0
  if (plan.method === 'nothing') return { samples: out, rounds }
  for (let p = 0; p < planes; p++) {
    const image = samples.subarray(p * size, (p + 1) * size)
    const target = out.subarray(p * size, (p + 1) * size)
    const how = plan.planes[Math.min(p, plan.planes.length - 1)]!
    if (plan.method === 'wavelets') sharpenPlane(image, width, height, how, target)
    else if (plan.method === 'wiener') target.set(await filterPlane(image, width, height, how.curve!, pause))
    else {
      const lucy = await lucyPlane(image, width, height, { transfer: how.curve!, iterations: plan.iterations, floor: how.floor, noise: plan.stopAtNoise ? how.noise : 0 }, pause)
      target.set(lucy.samples)
      rounds = Math.max(rounds, lucy.rounds)
    }
    await pause()
  }
  return { samples: out, rounds }
}
