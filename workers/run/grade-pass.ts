import { averageScale } from './average'
import { gradeTable, type GradeTable } from './columns'
import { toAll, type PassContext } from './context'
import { EMPTY, OUTSIDE, SATURATED } from './computer'
import { Feed, pieceFrames, ship } from './feed'
import type { GradeReply } from './messages'
import { reasonCode } from './rank'
import type { RegisterPlan } from '../register/types'
import type { Surveyed } from './survey-frames'

export interface Graded {
  table: GradeTable
  /** Exact sum of the frames as stored, in the fixed point of average.ts, and how many they are. */
  averageSum: Float64Array
  averageCount: number
}

/** What a grade that was cut short had got; blocks before `nextBlock` are in it. */
export interface GradeProgress extends Graded { nextBlock: number }

export interface GradeOptions {
  /** Registers every frame on the survey's reference; null leaves it at the shifts that places tell. */
  register: RegisterPlan | null
  resume: GradeProgress | null
  /** Called now and then with a table that is complete up to a block. */
  checkpoint: ((progress: GradeProgress) => Promise<void>) | null
  checkpointMs: number
  /** Called when frames have been graded, at most a few times a second. */
  onGrowth: (table: GradeTable, done: number) => Promise<void>
}

/** Least time between two tables; longer for many frames, because every table is copied whole. */
const growthMs = (frames: number): number => Math.max(250, frames / 100)

/** One sequential read: every frame's scores, place and first shift; and the plain average. */
export async function gradePass(context: PassContext, surveyed: Surveyed, options: GradeOptions): Promise<Graded> {
  const { frames, pool, signal, progress } = context
  const table = options.resume?.table ?? gradeTable(frames.count)
  const averageSum = options.resume?.averageSum ?? new Float64Array(frames.frameSamples)
  let averageCount = options.resume?.averageCount ?? 0
  const firstBlock = options.resume?.nextBlock ?? 0
  const { plan, score, survey } = surveyed
  await toAll(pool, worker => pool.call(worker, { op: 'take-average', size: frames.frameSamples }))
  await toAll(pool, worker => pool.call(worker, { op: 'setup', setup: { prepare: plan, score, register: options.register } }))
  progress.begin('grade', 0, frames.count, firstBlock * frames.blockFrames)

  const feed = new Feed(pool, signal)
  const collectAverage = () => toAll(pool, async (worker) => {
    const { sum } = await pool.call(worker, { op: 'take-average', size: frames.frameSamples })
    for (let i = 0; i < sum.length; i++) averageSum[i]! += sum[i]!
  })
  const size = pieceFrames(plan.width * plan.height)
  let grownAt = performance.now()
  let savedAt = grownAt
  let done = firstBlock * frames.blockFrames
  const order = Array.from({ length: frames.blockCount - firstBlock }, (_, i) => firstBlock + i)
  for await (const block of frames.blocks(order, signal)) {
    for (let from = 0; from < block.count; from += size) {
      const piece = ship(pool, block, from, Math.min(size, block.count - from), frames.frameSamples)
      averageCount += piece.batch.count
      await feed.send(null, { op: 'grade', batch: piece.batch, register: options.register !== null, averageScale: averageScale(frames.reader.facts, surveyed.scale) }, piece.transfer, (reply) => {
        fill(table, piece.batch.first, reply, survey)
        done += piece.batch.count
        progress.add(piece.batch.count)
      })
    }
    markUnreadable(table, frames.unreadable)
    const now = performance.now()
    if (now - grownAt > growthMs(frames.count)) {
      await options.onGrowth(table, done)
      grownAt = performance.now()
    }
    if (options.checkpoint && now - savedAt >= options.checkpointMs) {
      await feed.drain()
      await collectAverage()
      await options.checkpoint({ table, averageSum, averageCount, nextBlock: frames.blockOf(block.first) + 1 })
      savedAt = performance.now()
    }
  }
  await feed.drain()
  await collectAverage()
  markUnreadable(table, frames.unreadable)
  progress.end()
  return { table, averageSum, averageCount: averageCount - frames.unreadable.size }
}

function fill(table: GradeTable, first: number, reply: GradeReply, reference: { refX: number, refY: number }): void {
  for (const name of ['laplacian', 'peak', 'flux', 'background', 'x', 'y'] as const) table[name].set(reply[name], first)
  table.dx.set(reply.shifts?.dx ?? reply.x.map(x => reference.refX - x), first)
  table.dy.set(reply.shifts?.dy ?? reply.y.map(y => reference.refY - y), first)
  if (reply.shifts) table.transfer.set(reply.shifts.transfer, first)
  for (let i = 0; i < reply.flags.length; i++) {
    const flags = reply.flags[i]!
    const unsure = reply.shifts !== null && reply.shifts.sure[i] === 0
    table.setAside[first + i] = flags & EMPTY
      ? reasonCode('empty')
      : flags & SATURATED
        ? reasonCode('saturated')
        : flags & OUTSIDE
          ? reasonCode('out-of-field')
          : unsure ? reasonCode('unsure') : 0
  }
}

/** Frames that could not be read hold zeros: they are set aside and add nothing to the average. */
function markUnreadable(table: GradeTable, unreadable: ReadonlySet<number>): void {
  for (const frame of unreadable) table.setAside[frame] = reasonCode('unreadable')
}
