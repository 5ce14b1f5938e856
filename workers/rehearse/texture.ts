/** Smooth random textures for drawn scenes. */
import { createRandom } from './random'

/** Colour planes of a drawn scene, brightness 0-1, row 0 at the top, middle at (size/2, size/2). */
export interface Drawing { planes: Float64Array[] }

/** Value noise: a periodic lattice of random numbers −1…1, joined smoothly. `period` lattice cells on a side, a power of two. */
export function createNoise(seed: number, stream: number, period: number): (x: number, y: number) => number {
  const random = createRandom(seed, stream)
  const lattice = Float64Array.from({ length: period * period }, () => 2 * random.uniform() - 1)
  const mask = period - 1
  const ease = (t: number) => t * t * t * (t * (6 * t - 15) + 10)
  return (x, y) => {
    const column = Math.floor(x)
    const row = Math.floor(y)
    const u = ease(x - column)
    const v = ease(y - row)
    const at = (i: number, j: number) => lattice[((row + j) & mask) * period + ((column + i) & mask)]!
    return (at(0, 0) * (1 - u) + at(1, 0) * u) * (1 - v) + (at(0, 1) * (1 - u) + at(1, 1) * u) * v
  }
}

/** Octaves of value noise, each twice as fine and `roughness` times as strong; about −1…1. Periodic over 1 × 1. */
export function createFractal(seed: number, stream: number, coarsest: number, octaves: number, roughness: number): (x: number, y: number) => number {
  const layers = Array.from({ length: octaves }, (_, i) => ({ noise: createNoise(seed, stream + i, coarsest * 2 ** i), cells: coarsest * 2 ** i, gain: roughness ** i }))
  const total = layers.reduce((sum, layer) => sum + layer.gain, 0)
  return (x, y) => layers.reduce((sum, { noise, cells, gain }) => sum + gain * noise(x * cells, y * cells), 0) / total
}

/** 0 below `from`, 1 above `to`, smooth between. */
export function smoothStep(from: number, to: number, value: number): number {
  const t = Math.max(0, Math.min(1, (value - from) / (to - from)))
  return t * t * (3 - 2 * t)
}
