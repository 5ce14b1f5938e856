import { addInto } from '../stack/fixed'
import { rungCounts, rungOfRank, shareRungs } from '../stack/rungs'
import type { ResampleKernel } from '../../shared/schemas/recipe'
import { outPlanes } from '../prepare/frame'
import type { ShiftTable } from './columns'
import { toAll, type PassContext } from './context'
import { Feed } from './feed'
import { picked, pieces, type Picked } from './picked'
import { tileCount } from '../patches/mesh'
import { tileShift, type TileOrder } from './tile-order'
import type { LadderKeeper } from './ladder-resume'
import type { Ranking } from './rank'
import type { Surveyed } from './survey-frames'

export interface Ladder {
  counts: number[]
  planes: 1 | 3
  width: number
  height: number
  scale: number
  kernel: ResampleKernel
  /** Exact sum of the best counts[k] frames, in fixed point; planes × height × width each. */
  sums: Float64Array[]
  /** The same for the frames of even place in the order alone (ranks 1, 3, 5 …): one half of a split stack. */
  halves: Float32Array[]
}

/** Most bytes that the ladder's exact sums may take; fewer rungs for larger frames. */
const LADDER_BYTES = 384 * 2 ** 20
/** Bytes per sample and rung: a double for the sum, a float for the half, two 32-bit sums while adding. */
const SAMPLE_BYTES = 8 + 4 + 8

export function mostRungs(samples: number, bytes = LADDER_BYTES): number {
  return Math.max(1, Math.min(60, Math.floor(bytes / (samples * SAMPLE_BYTES))))
}

export interface LadderOptions { tiles?: TileOrder | null, keeper: LadderKeeper | null, checkpointMs: number }

/** Adds every ranked frame, shifted, to the sum of its rung; then makes the sums cumulative. */
export async function ladderPass(context: PassContext, surveyed: Surveyed, shifts: ShiftTable, ranking: Ranking, kernel: ResampleKernel, options: LadderOptions): Promise<Ladder> {
  const { pool, signal, progress } = context
  const { plan, scale } = surveyed
  const planes = outPlanes(plan)
  const counts = rungCounts(ranking.order.length, mostRungs(plan.width * plan.height * planes))
  const owner = shareRungs(counts, pool.size)
  // Each worker numbers its own rungs; a rung has two slots, for odd and even ranks.
  const owned = new Array<number>(pool.size).fill(0)
  const local = owner.map(worker => owned[worker]!++)
  const openSums = () => toAll(pool, worker => pool.call(worker, { op: 'sums', plan, slots: owned[worker]! * 2, planes, scale, kernel, mesh: options.tiles?.field.mesh ?? null }))
  await openSums()
  const feed = new Feed(pool, signal)
  const rungOf = (frame: number) => rungOfRank(counts, ranking.rank[frame]! - 1)
  const slotOf = (frame: number) => local[rungOf(frame)]! * 2 + ((ranking.rank[frame]! - 1) & 1)
  const places = { worker: owner.flatMap(worker => [worker, worker]), slot: local.flatMap(k => [2 * k, 2 * k + 1]) }
  const restored = await options.keeper?.restore(pool, places)
  if (options.keeper && !restored) await openSums()
  const done = restored ?? new Uint8Array(ranking.rank.length)
  const left = ranking.order.filter(frame => done[frame] === 0).sort()
  progress.begin('ladder', 0, ranking.order.length, ranking.order.length - left.length)
  let savedAt = performance.now()
  for await (const { block, picks } of picked(context, left)) {
    for (let worker = 0; options.tiles && worker < pool.size; worker++) {
      await sendTiles(context, feed, options.tiles, shifts, { block, picks }, worker, (rank) => {
        const rung = rungOfRank(counts, rank - 1)
        return owner[rung] === worker ? local[rung]! * 2 + ((rank - 1) & 1) : null
      })
      if (worker === 0) progress.add(picks.length)
    }
    for (let worker = 0; !options.tiles && worker < pool.size; worker++) {
      const mine = picks.filter(pick => owner[rungOf(block.first + pick)] === worker)
      for (const { piece, part } of pieces(context, { block, picks: mine })) {
        const ids = Array.from(part, pick => piece.batch.first + pick)
        await feed.send(worker, {
          op: 'add', batch: piece.batch, picks: part, slot: Int32Array.from(ids, slotOf),
          dx: Float64Array.from(ids, i => shifts.dx[i]!), dy: Float64Array.from(ids, i => shifts.dy[i]!),
        }, piece.transfer, () => progress.add(ids.length))
      }
    }
    for (const pick of picks) done[block.first + pick] = 1
    if (options.keeper && performance.now() - savedAt >= options.checkpointMs) {
      await feed.drain()
      await options.keeper.save(pool, places, done, plan.width * plan.height * planes * 8)
      savedAt = performance.now()
    }
  }
  await feed.drain()
  const ladder: Ladder = { counts, planes, width: plan.width, height: plan.height, scale, kernel, sums: [], halves: [] }
  await cumulate(context, ladder, owner, local)
  await toAll(pool, worker => pool.call(worker, { op: 'rest' }))
  await options.keeper?.drop()
  progress.end()
  return ladder
}

/** Takes the rungs from their owners, best first, and adds each to the one before. */
async function cumulate({ pool, signal }: PassContext, ladder: Ladder, owner: number[], local: number[]): Promise<void> {
  const size = ladder.planes * ladder.width * ladder.height
  const whole = new Float64Array(size)
  const half = new Float64Array(size)
  for (let rung = 0; rung < ladder.counts.length; rung++) {
    const { sums: [even, odd] } = await pool.call(owner[rung]!, { op: 'take', slots: [local[rung]! * 2, local[rung]! * 2 + 1] })
    signal.throwIfAborted()
    if (even!.length > 0) {
      addInto(half, even!)
      addInto(whole, even!)
    }
    if (odd!.length > 0) addInto(whole, odd!)
    ladder.sums.push(whole.slice())
    ladder.halves.push(new Float32Array(half))
  }
}

/** Sends one worker the tiles of some frames that belong to its rungs. `slotOf`: the slot of a rank, or null where it is another worker's. */
async function sendTiles(context: PassContext, feed: Feed, { field, ranks }: TileOrder, shifts: ShiftTable, { block, picks }: Picked, worker: number, slotOf: (rank: number) => number | null): Promise<void> {
  const count = tileCount(field.mesh)
  const has = (frame: number) => {
    for (let t = 0; t < count; t++) if (slotOf(ranks[frame * count + t]!) !== null) return true
    return false
  }
  for (const { piece, part } of pieces(context, { block, picks: picks.filter(pick => has(block.first + pick)) })) {
    const tiles = new Int32Array(part.length)
    const list: { tile: number, slot: number, dx: number, dy: number }[] = []
    part.forEach((pick, i) => {
      const frame = piece.batch.first + pick
      for (let tile = 0; tile < count; tile++) {
        const slot = slotOf(ranks[frame * count + tile]!)
        if (slot === null) continue
        tiles[i]! += 1
        list.push({ tile, slot, ...tileShift(field, count, frame, tile, shifts.dx[frame]!, shifts.dy[frame]!) })
      }
    })
    await feed.send(worker, {
      op: 'add-tiles', batch: piece.batch, picks: part, tiles, tile: Int32Array.from(list, t => t.tile), slot: Int32Array.from(list, t => t.slot),
      dx: Float64Array.from(list, t => t.dx), dy: Float64Array.from(list, t => t.dy),
    }, piece.transfer, () => undefined)
  }
}
