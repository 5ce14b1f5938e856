/** Gains of wavelet scales that bring a stack nearest to the scene through the telescope alone, from measured figures. */
import { steadyCos, steadySin } from '../../shared/steadymath'

/** What is known at one frequency: power of signal and noise in the stack, its transfer, and how many values share it. */
export interface Known { f: number, signal: number, noise: number, transfer: number, count: number }

/** Transfer of one B3 smoothing with 2^j px between taps along one axis. */
const smooth = (f: number, j: number): number => {
  const angle = 2 * Math.PI * f * 2 ** j
  return (6 + 8 * steadyCos(angle) + 2 * steadyCos(2 * angle)) / 16
}

/** Transfers of the wavelet planes w_1 … w_scales at (fx, fy); what they lack of 1 is the smooth rest. */
export function scaleTransfers(fx: number, fy: number, scales: number): number[] {
  const out: number[] = []
  let before = 1
  for (let j = 0; j < scales; j++) {
    const next = before * smooth(fx, j) * smooth(fy, j)
    out.push(before - next)
    before = next
  }
  return out
}

/** Directions that stand for a ring: scales of a square grid are not round. */
const DIRECTIONS = [0, 1, 2, 3, 4].map(k => [steadyCos(k * Math.PI / 16), steadySin(k * Math.PI / 16)] as const)

/** Weight of a gain's own wish beside the expected error: what a scale with hardly any power gets. */
const OWN = 0.003
export const MOST_GAIN = 8

/**
 * Gains g that make the expected error least: Σ over frequencies of (T G − 1)² P + G² N, with P = signal / T² the scene's power
 * and G = 1 + Σ (g_j − 1) R_j the filter that the gains make. It is the Wiener filter (Wiener 1949) among those that wavelets
 * can form. Bounded to 0 … MOST_GAIN; solved by coordinate descent in a fixed order.
 */
export function fittingGains(known: readonly Known[], scales: number): number[] {
  const matrix = Array.from({ length: scales }, () => new Float64Array(scales))
  const right = new Float64Array(scales)
  const own = new Float64Array(scales)
  const ownWeight = new Float64Array(scales)
  let all = 0
  for (const { f, signal, noise, transfer, count } of known) {
    const t = Math.max(1 / MOST_GAIN, transfer)
    const s = Math.max(0, signal)
    const scene = s / (t * t)
    // Per power of the scene, so that bright coarse structure does not drown what fine detail wants.
    const weight = count / Math.max(1e-30, scene + noise / (t * t))
    const wanted = s + noise > 0 ? s / (s + noise) / t : 0
    for (const [c, d] of DIRECTIONS) {
      const r = scaleTransfers(f * c, f * d, scales)
      for (let j = 0; j < scales; j++) {
        // d/dg of ½[(T G − 1)² P + G² N] at G = 1 + Σ h R: the part that does not depend on h …
        right[j]! -= weight * r[j]! * ((t - 1) * t * scene + noise)
        for (let k = 0; k < scales; k++) matrix[j]![k]! += weight * r[j]! * r[k]! * (t * t * scene + noise)
        own[j]! += count * r[j]! * r[j]! * wanted
        ownWeight[j]! += count * r[j]! * r[j]!
      }
    }
    all += weight * (s + noise) * DIRECTIONS.length
  }
  for (let j = 0; j < scales; j++) {
    const wish = ownWeight[j]! > 0 ? own[j]! / ownWeight[j]! - 1 : 0
    matrix[j]![j]! += OWN * all
    right[j]! += OWN * all * wish
  }
  return descend(matrix, right).map(h => 1 + h)
}

/** Solves matrix × h = right with −1 ≤ h ≤ MOST_GAIN − 1 for a symmetric positive matrix. */
function descend(matrix: readonly Float64Array[], right: Float64Array): number[] {
  const n = right.length
  const h = new Array<number>(n).fill(0)
  for (let round = 0; round < 400; round++) {
    for (let j = 0; j < n; j++) {
      let rest = right[j]!
      for (let k = 0; k < n; k++) if (k !== j) rest -= matrix[j]![k]! * h[k]!
      const diagonal = matrix[j]![j]!
      h[j] = diagonal > 0 ? Math.min(MOST_GAIN - 1, Math.max(-1, rest / diagonal)) : 0
    }
  }
  return h
}
