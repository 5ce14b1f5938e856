import { keepCount, proofFractions } from '../../shared/schemas/run'

/** Rungs wanted, where memory allows. */
export const RUNGS = 48

/**
 * Ascending counts of frames at which the ladder has a rung; the last is `ranked`. They hold the counts of
 * the proofs and grow by a constant ratio while small, then by a constant step of ranked / (most / 1.5), so
 * that a guest finds fine steps where fractions are small and no stack is ever far from a rung.
 *
 * @param most upper bound on the number of rungs; proofs are kept first. Never more than 128.
 */
export function rungCounts(ranked: number, most = RUNGS): number[] {
  if (ranked <= 0) return []
  const proofs = new Set(proofFractions.map(fraction => keepCount(fraction, ranked)))
  if (most <= proofs.size) return [...proofs].sort((a, b) => a - b).slice(-Math.max(1, most))
  if (ranked <= most) return Array.from({ length: ranked }, (_, i) => i + 1)
  let counts: number[] = []
  // The finest ratio whose rungs, with those of the proofs, stay within the bound.
  for (let ratio = 1.04; ratio < 4; ratio *= 1.02) {
    counts = spaced(ranked, ratio, Math.max(1, Math.ceil(ranked * 1.8 / most)), proofs)
    if (counts.length <= most) break
  }
  return counts.length <= most ? counts : [...proofs].sort((a, b) => a - b)
}

function spaced(ranked: number, ratio: number, step: number, proofs: ReadonlySet<number>): number[] {
  const counts = new Set(proofs)
  for (let count = 1; count < ranked; count = Math.min(Math.max(count + 1, Math.round(count * ratio)), count + step)) counts.add(count)
  counts.add(ranked)
  return [...counts].sort((a, b) => a - b)
}

/** The rung of each rank (0-based rank → rung index): rung k holds ranks counts[k-1] … counts[k]-1. */
export function rungOfRank(counts: readonly number[], rank: number): number {
  let low = 0
  let high = counts.length - 1
  while (low < high) {
    const middle = (low + high) >> 1
    if (rank < counts[middle]!) high = middle
    else low = middle + 1
  }
  return low
}

/**
 * Shares rungs out to workers so that each has about the same number of frames: largest first, each to the
 * worker with least; ties to the lower index.
 */
export function shareRungs(counts: readonly number[], workers: number): number[] {
  const sizes = counts.map((count, k) => ({ k, size: count - (k > 0 ? counts[k - 1]! : 0) }))
  sizes.sort((a, b) => b.size - a.size || a.k - b.k)
  const load = new Array<number>(workers).fill(0)
  const owner = new Array<number>(counts.length).fill(0)
  for (const { k, size } of sizes) {
    const least = load.indexOf(Math.min(...load))
    owner[k] = least
    load[least]! += size
  }
  return owner
}
