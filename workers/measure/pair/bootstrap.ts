import { angleDifference, DEGREES, reduce360 } from '../../../shared/astro/angles'
import type { Component } from './types'

/** What is measured of a component against the first. Angles on the screen: from up counter-clockwise through left, degrees. */
export interface Relative { sepPx: number, paDeg: number, dMag: number }
export interface RelativeErr { sepPxErr: number, paDegErr: number, dMagErr: number }

export function relativeTo(first: Component, star: Component): Relative {
  const dx = star.x - first.x
  const dy = star.y - first.y
  return { sepPx: Math.hypot(dx, dy), paDeg: reduce360(Math.atan2(-dx, -dy) * DEGREES), dMag: -2.5 * Math.log10(Math.max(1e-9, star.flux / first.flux)) }
}

const RESAMPLES = 400

/**
 * Standard errors by the bootstrap over blocks of time (Efron 1979; blocks because neighbouring frames share their air:
 * Künsch 1989, Ann. Statist. 17, 1217): blocks are drawn with replacement, their answers averaged, and the scatter of the
 * averages is the error, widened for the few blocks there are.
 * @param blocks answers of each block: all components, fluxes relative to the first
 */
export function bootstrapErrors(blocks: readonly Component[][], all: readonly Component[], seed = 1): RelativeErr[] {
  const n = blocks.length
  const random = generator(seed)
  const draws: Relative[][] = all.slice(1).map(() => [])
  for (let k = 0; k < RESAMPLES; k++) {
    const mean = all.map(() => ({ x: 0, y: 0, flux: 0 }))
    for (let i = 0; i < n; i++) {
      const block = blocks[Math.floor(random() * n)]!
      block.forEach((star, j) => {
        mean[j]!.x += star.x / n
        mean[j]!.y += star.y / n
        mean[j]!.flux += star.flux / n
      })
    }
    draws.forEach((list, j) => list.push(relativeTo(mean[0]!, mean[j + 1]!)))
  }
  // Few blocks tell their own scatter badly: Student's t holds 68.3 % within about 1 + 0.53/(n − 1) of it.
  const widen = Math.sqrt(n / (n - 1)) * (1 + 0.53 / (n - 1))
  return draws.map((list, j) => {
    const centre = relativeTo(all[0]!, all[j + 1]!)
    const rms = (away: (one: Relative) => number) => {
      const mean = list.reduce((sum, one) => sum + away(one), 0) / list.length
      return widen * Math.sqrt(list.reduce((sum, one) => sum + (away(one) - mean) ** 2, 0) / list.length)
    }
    return { sepPxErr: rms(one => one.sepPx), paDegErr: rms(one => angleDifference(one.paDeg, centre.paDeg)), dMagErr: rms(one => one.dMag) }
  })
}

/** Mulberry32: the same draws everywhere. */
function generator(seed: number): () => number {
  let state = seed | 0
  return () => {
    state = (state + 0x6d2b79f5) | 0
    let t = Math.imul(state ^ (state >>> 15), 1 | state)
    t = (t + Math.imul(t ^ (t >>> 7), 61 | t)) ^ t
    return ((t ^ (t >>> 14)) >>> 0) / 4294967296
  }
}
