import type { PassContext } from './context'
import { pieceFrames, ship } from './feed'
import type { Batch } from './messages'

/** Some frames of one batch, as numbers within it, ascending. */
export interface Picked { block: Batch, picks: Int32Array }

/**
 * Batches that hold some frames (given ascending), each with the frames' numbers within it. Where few
 * frames of a block are wanted and it is not in memory, the frames are read one by one.
 */
export async function* picked({ frames, signal }: PassContext, which: Int32Array): AsyncGenerator<Picked> {
  const byBlock = new Map<number, number[]>()
  for (const frame of which) {
    const block = frames.blockOf(frame)
    const list = byBlock.get(block)
    if (list) list.push(frame)
    else byBlock.set(block, [frame])
  }
  const many: number[] = []
  for (const [block, list] of byBlock) {
    if (frames.keepsAll || list.length * 2 > frames.blockFrames) many.push(block)
    else for (const frame of list) yield { block: await frames.frame(frame, signal), picks: Int32Array.of(0) }
  }
  for await (const block of frames.blocks(many, signal)) {
    yield { block, picks: Int32Array.from(byBlock.get(frames.blockOf(block.first))!, frame => frame - block.first) }
  }
}

/** A batch's picked frames in requests of a few milliseconds. */
export function* pieces({ frames, pool }: PassContext, { block, picks }: Picked) {
  const size = pieceFrames(frames.reader.facts.width * frames.reader.facts.height)
  for (let from = 0; from < picks.length; from += size) {
    const part = picks.slice(from, from + size)
    const start = part[0]!
    const piece = ship(pool, block, start, part[part.length - 1]! - start + 1, frames.frameSamples)
    yield { piece, part: part.map(pick => pick - start) }
  }
}
