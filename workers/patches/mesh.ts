/** Tiles that overlap softly: near its middle a tile stands alone, in between two neighbours (four at corners) share. */
import type { Mesh } from './types'

/** Tiles of about `side` px over the stack's grid. */
export function makeMesh(width: number, height: number, side: number): Mesh {
  return { width, height, columns: Math.max(1, Math.round(width / side)), rows: Math.max(1, Math.round(height / side)) }
}

export const tileCount = ({ columns, rows }: Mesh): number => columns * rows

/** Middle of a tile, px. */
export function tileMiddle({ width, height, columns, rows }: Mesh, tile: number): { x: number, y: number } {
  return { x: ((tile % columns) + 0.5) * width / columns - 0.5, y: (Math.floor(tile / columns) + 0.5) * height / rows - 0.5 }
}

/** Weights of one tile along an axis, from pixel `from` on. */
export interface AxisWeights { from: number, weights: Float32Array }

/** Each pixel's weights sum to 1 over the tiles; a smooth step over half a tile joins neighbours. */
export function axisWeights(length: number, tiles: number): AxisWeights[] {
  const side = length / tiles
  return Array.from({ length: tiles }, (_, k) => {
    const from = k === 0 ? 0 : Math.max(0, Math.ceil((k - 0.25) * side - 0.5))
    const to = k === tiles - 1 ? length : Math.min(length, Math.floor((k + 1.25) * side - 0.5) + 1)
    const weights = new Float32Array(Math.max(0, to - from))
    for (let i = 0; i < weights.length; i++) {
      const at = (from + i + 0.5) / side
      const rise = k === 0 ? 1 : step((at - k) / 0.5 + 0.5)
      const fall = k === tiles - 1 ? 1 : 1 - step((at - k - 1) / 0.5 + 0.5)
      weights[i] = rise * fall
    }
    return { from, weights }
  })
}

function step(t: number): number {
  const u = Math.min(1, Math.max(0, t))
  return u * u * (3 - 2 * u)
}
