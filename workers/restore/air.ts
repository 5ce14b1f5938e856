/** What selected, registered short exposures lose against the telescope alone, looked up in air-table.ts. */
import { steadyExp, steadyLn } from '../../shared/steadymath'
import { tableFrequencies, tableRatios, tableShares, tableTransfers } from './air-table'

/** Place of a value between ascending nodes: index of the lower one and the way to the next, 0-1. */
function between(nodes: readonly number[], value: number): [number, number] {
  let k = 0
  while (k < nodes.length - 2 && value > nodes[k + 1]!) k++
  return [k, Math.min(1, Math.max(0, (value - nodes[k]!) / (nodes[k + 1]! - nodes[k]!)))]
}

const lnShares = tableShares.map(share => steadyLn(share))
const ln: readonly (readonly Float64Array[])[] = tableRatios.map((_, r) => tableShares.map((_, s) =>
  Float64Array.from(tableFrequencies, (_, f) => (r === 0 || f === 0 ? 0 : steadyLn(Math.max(1e-3, tableTransfers[r - 1]![s]![f - 1]!))))))

/**
 * ln of the transfer at u = frequency over the cut-off, of the stack of the best `share` of frames, in air of D/r0. Linear between the
 * table's nodes in u, D/r0 and ln of the share; clamped to its ends.
 */
export function lnSelectedTransfer(u: number, share: number, apertureOverR0: number): number {
  const [r, down] = between(tableRatios, apertureOverR0)
  const [s, along] = between(lnShares, steadyLn(Math.min(1, Math.max(0.02, share))))
  const [f, on] = between(tableFrequencies, u)
  const at = (row: number, column: number) => {
    const line = ln[row]![column]!
    return line[f]! + on * (line[f + 1]! - line[f]!)
  }
  const upper = at(r, s) + along * (at(r, s + 1) - at(r, s))
  const lower = at(r + 1, s) + along * (at(r + 1, s + 1) - at(r + 1, s))
  return upper + down * (lower - upper)
}

export const selectedTransfer = (u: number, share: number, apertureOverR0: number): number => steadyExp(lnSelectedTransfer(u, share, apertureOverR0))

/** D/r0 from the motion of the image, rms per axis in px: σ² = 0.182 (D/r0)^(5/3) (λ/D)² (image motion in Kolmogorov air, Tatarski; from memory). */
export const ratioFromMotion = (motionPx: number, lambdaPx: number): number => steadyExp(1.2 * steadyLn(Math.max(1e-3, motionPx / lambdaPx)) + 0.6 * steadyLn(1 / 0.182))
