/**
 * What selected, registered short exposures lose against the telescope alone, as a transfer function: a core that the air
 * left alone and a halo as wide as the seeing,
 *
 *   T(u) = S + (1 − S) exp(−3.44 (u D/r0)^(5/3)),   u = frequency over the optical cut-off D/λ.
 *
 * S is the Strehl ratio of the stack, the halo the long-exposure transfer of Kolmogorov turbulence (Fried 1966, J. Opt. Soc.
 * Am. 56, 1372). That the core keeps the telescope's own transfer and the rest spreads like the seeing is the usual
 * description of partly corrected images.
 */
import { steadyExp, steadyLn } from '../../shared/steadymath'

/** Rows of the table below: aperture over Fried's parameter. */
const RATIOS = [0, 1, 2, 3, 4, 5, 7, 10] as const
/** Columns: share of the frames, best first. */
const SHARES = [0.01, 0.1, 0.3, 0.5, 1] as const
/**
 * Mean Strehl ratio of the best share of frames, each recentred on its brightest speckle: a direct calculation with 275 Zernike
 * modes and Noll's covariances, 4000 frames a row (rows 2-10; tests/reference holds the simulator to the same figures).
 * Row 1 is exp(−σ²) for the distribution of σ² about 0.134 rad² (Noll 1976) scaled from row 2.
 */
const STREHL = [
  [1, 1, 1, 1, 1],
  [0.953, 0.936, 0.921, 0.909, 0.871],
  [0.858, 0.811, 0.769, 0.738, 0.646],
  [0.760, 0.683, 0.615, 0.567, 0.452],
  [0.638, 0.548, 0.468, 0.416, 0.321],
  [0.534, 0.423, 0.344, 0.300, 0.231],
  [0.349, 0.250, 0.200, 0.176, 0.137],
  [0.187, 0.134, 0.109, 0.096, 0.076],
] as const

/** Place of a value between ascending nodes: index of the lower one and the way to the next, 0-1. */
function between(nodes: readonly number[], value: number): [number, number] {
  let k = 0
  while (k < nodes.length - 2 && value > nodes[k + 1]!) k++
  return [k, Math.min(1, Math.max(0, (value - nodes[k]!) / (nodes[k + 1]! - nodes[k]!)))]
}

const logShares = SHARES.map(share => steadyLn(share))

/** Expected Strehl ratio of the stack of the best `share` (0.01-1; clamped) of frames at a ratio D/r0 (clamped to 10). */
export function selectedStrehl(share: number, apertureOverR0: number): number {
  const [row, down] = between(RATIOS, apertureOverR0)
  const [column, along] = between(logShares, steadyLn(Math.min(1, Math.max(0.01, share))))
  const at = (r: number) => STREHL[r]![column]! + along * (STREHL[r]![column + 1]! - STREHL[r]![column]!)
  return at(row) + down * (at(row + 1) - at(row))
}

/** x^(5/3) for x ≥ 0. */
export const fiveThirds = (x: number): number => (x > 0 ? steadyExp(5 / 3 * steadyLn(x)) : 0)

/** Transfer of the halo at u = frequency / cut-off. */
export const haloTransfer = (u: number, apertureOverR0: number): number => steadyExp(-3.44 * fiveThirds(u * apertureOverR0))

/** Transfer of the stack of the best `share` of frames against the telescope alone. */
export function selectedTransfer(u: number, share: number, apertureOverR0: number): number {
  const core = selectedStrehl(share, apertureOverR0)
  return core + (1 - core) * haloTransfer(u, apertureOverR0)
}
