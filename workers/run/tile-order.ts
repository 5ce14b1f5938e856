import type { Field } from '../patches/types'
import { tileCount } from '../patches/mesh'
import { rankFrames } from './rank'

/** Every tile's own ranking: the best n frames are others in another part of the field. */
export interface TileOrder {
  field: Field
  /** By tile: frame numbers, best first. All have the same length. */
  orders: Int32Array[]
  /** Frames × tiles: rank of a frame in a tile, 1 is best, 0 set aside. */
  ranks: Int32Array
}

/** Ranks by the frame's score times its local quality. */
export function tileOrder(field: Field, score: Float64Array, setAside: Uint8Array): TileOrder {
  const tiles = tileCount(field.mesh)
  const orders: Int32Array[] = []
  const ranks = new Int32Array(score.length * tiles)
  for (let tile = 0; tile < tiles; tile++) {
    const local = score.map((value, frame) => (value > 0 ? value * field.quality[frame * tiles + tile]! : value))
    const { order, rank } = rankFrames({ score: local, setAside })
    orders.push(order)
    for (let frame = 0; frame < rank.length; frame++) ranks[frame * tiles + tile] = rank[frame]!
  }
  return { field, orders, ranks }
}

/** The whole shift of a frame in a tile. */
export const tileShift = (field: Field, tiles: number, frame: number, tile: number, dx: number, dy: number) =>
  ({ dx: dx + field.dx[frame * tiles + tile]!, dy: dy + field.dy[frame * tiles + tile]! })
