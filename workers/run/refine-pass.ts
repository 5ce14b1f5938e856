import { coveredBy } from '../stack/accumulate'
import { coverageCounts, coverageMarks, markCovered } from '../stack/coverage'
import { addInto } from '../stack/fixed'
import { fillUncovered, meanOf } from '../stack/mean'
import { makeRegisterPlan } from '../register/plan'
import { nextReferenceFrames } from '../register/reference'
import { settleShifts } from '../register/settle'
import type { Recipe } from '../../shared/schemas/recipe'
import type { GradeTable, ShiftTable } from './columns'
import { toAll, type PassContext } from './context'
import { Feed } from './feed'
import { picked, pieces } from './picked'
import type { Reference } from './messages'
import { rankFrames, reasonCode } from './rank'
import type { Surveyed } from './survey-frames'

export interface Refined { shifts: ShiftTable, reference: Reference }

/** A last round that was cut short: frames marked in `done` have their shifts. */
export interface RefineProgress extends Refined { done: Uint8Array }

export interface RefineOptions {
  resume: RefineProgress | null
  checkpoint: ((progress: RefineProgress) => Promise<void>) | null
  checkpointMs: number
}

/**
 * Remakes the reference from registered frames and finds the shifts again. Only the last round registers
 * every frame; the rounds before it register the frames of the reference alone, because nothing else reads
 * their shifts.
 *
 * The stack's grid is chosen here: a whole-pixel offset puts the target at its median place, so that the
 * stack covers as much of the field as the capture does.
 */
export async function refinePass(context: PassContext, surveyed: Surveyed, graded: GradeTable, recipe: Recipe, options: RefineOptions): Promise<Refined> {
  if (options.resume) {
    await lastRound(context, surveyed, recipe, graded, options.resume, options)
    setUnsureAside(surveyed, options.resume.shifts)
    return options.resume
  }
  const { referenceFraction, refineRounds } = recipe.register
  const shifts: ShiftTable = {
    dx: graded.dx.slice(), dy: graded.dy.slice(),
    confidence: new Float64Array(graded.count).fill(Number.NaN), transfer: graded.transfer.slice(), setAside: graded.setAside.slice(),
  }
  let reference = firstReference(surveyed)
  // A measure that fits the target chooses the reference, so that the shifts do not depend on what ranks.
  const { order } = rankFrames({ score: surveyed.survey.kind === 'star' ? graded.peak : graded.laplacian, setAside: graded.setAside })
  const best = nextReferenceFrames(order, referenceFraction).sort()
  // With rounds to come the first pass took places only: the best frames are registered before they are added.
  if (refineRounds > 0) await registerFrames(context, surveyed, recipe, reference, best, graded, shifts, 0)
  const offset = moveGrid(surveyed, graded, shifts)
  const place = { x: reference.x + offset.x, y: reference.y + offset.y }
  for (let round = 1; round <= refineRounds && best.length > 0; round++) {
    const sure = best.filter(i => shifts.setAside[i] === 0)
    reference = { ...place, luminance: await makeReference(context, surveyed, sure.length > 0 ? sure : best, shifts) }
    if (round < refineRounds) await registerFrames(context, surveyed, recipe, reference, best, graded, shifts, round)
    else await lastRound(context, surveyed, recipe, graded, { shifts, reference, done: graded.setAside.map(code => code === 0 ? 0 : 1) }, options)
  }
  setUnsureAside(surveyed, shifts)
  return { shifts, reference }
}

/** Sets aside what one frame cannot know of itself: shifts that jump out of the drift of their neighbours. */
function setUnsureAside({ survey, score }: Surveyed, shifts: ShiftTable): void {
  const { dx, dy, confidence, setAside } = shifts
  const unsure = settleShifts({ dx, dy, confidence, sure: setAside.map(code => code === 0 ? 1 : 0) }, score.windowPx / (survey.form === 'star' ? 4 : 8))
  for (let i = 0; i < setAside.length; i++) if (setAside[i] === 0 && unsure[i]) setAside[i] = reasonCode('unsure')
}

/** Registers every usable frame that is not done on the last reference, saving now and then. */
async function lastRound(context: PassContext, surveyed: Surveyed, recipe: Recipe, graded: GradeTable, state: RefineProgress, options: RefineOptions): Promise<void> {
  const { shifts, reference, done } = state
  const which = Int32Array.from(done.keys()).filter(i => done[i] === 0)
  let savedAt = performance.now()
  await registerFrames(context, surveyed, recipe, reference, which, graded, shifts, recipe.register.refineRounds, async (ids) => {
    for (const frame of ids) done[frame] = 1
    if (!options.checkpoint || performance.now() - savedAt < options.checkpointMs) return
    savedAt = performance.now()
    await options.checkpoint(state)
  })
}

export const firstReference = ({ survey }: Surveyed): Reference => ({ luminance: survey.reference, x: survey.refX, y: survey.refY })

/** Moves all shifts from the survey's reference onto the stack's grid, by whole pixels, and says by how many. */
function moveGrid({ survey }: Surveyed, graded: GradeTable, shifts: ShiftTable): { x: number, y: number } {
  const offset = (places: Float64Array, at: number) => {
    const ok = places.filter((value, i) => graded.setAside[i] === 0 && Number.isFinite(value)).sort()
    return Math.round((ok[ok.length >> 1] ?? at) - at)
  }
  const x = offset(graded.x, survey.refX)
  const y = offset(graded.y, survey.refY)
  for (let i = 0; i < graded.count; i++) {
    shifts.dx[i]! += x
    shifts.dy[i]! += y
  }
  return { x, y }
}

/** The mean of some frames' luminance on the stack's grid. */
export async function makeReference(context: PassContext, surveyed: Surveyed, which: Int32Array, shifts: ShiftTable): Promise<Float32Array> {
  const { pool, signal } = context
  const { plan, scale } = surveyed
  const { width, height } = plan
  await toAll(pool, worker => pool.call(worker, { op: 'sums', plan, slots: 1, planes: 1, scale, kernel: 'cubic' }))
  const marks = coverageMarks(width, height)
  for (const i of which) markCovered(marks, width, coveredBy('cubic', width, height, shifts.dx[i]!, shifts.dy[i]!), 1)
  const feed = new Feed(pool, signal)
  for await (const batch of picked(context, which)) {
    for (const { piece, part } of pieces(context, batch)) {
      const ids = Array.from(part, pick => piece.batch.first + pick)
      await feed.send(null, {
        op: 'add', batch: piece.batch, picks: part, slot: new Int32Array(part.length),
        dx: Float64Array.from(ids, i => shifts.dx[i]!), dy: Float64Array.from(ids, i => shifts.dy[i]!),
      }, piece.transfer, () => undefined)
    }
  }
  await feed.drain()
  const sum = new Float64Array(width * height)
  for (let worker = 0; worker < pool.size; worker++) {
    const { sums } = await pool.call(worker, { op: 'take', slots: [0] })
    if (sums[0]!.length > 0) addInto(sum, sums[0]!)
  }
  signal.throwIfAborted()
  const counts = coverageCounts(marks, width, height)
  const luminance = meanOf(sum, counts, scale, 1)
  fillUncovered(luminance, counts, width, height, 1)
  return luminance
}

/** Registers some frames on a reference; expects the target of each at its graded place. */
async function registerFrames(context: PassContext, surveyed: Surveyed, recipe: Recipe, reference: Reference, which: Int32Array, graded: GradeTable, shifts: ShiftTable, round: number, onDone?: (ids: number[]) => Promise<void>): Promise<void> {
  const { pool, signal, progress } = context
  const register = makeRegisterPlan(surveyed.survey, recipe, surveyed.plan.width, surveyed.plan.height, reference.luminance, reference.x, reference.y)
  progress.begin('refine', round, which.length)
  await toAll(pool, worker => pool.call(worker, { op: 'setup', setup: { prepare: surveyed.plan, score: null, register } }))
  const feed = new Feed(pool, signal)
  const finished: number[] = []
  for await (const batch of picked(context, which)) {
    for (const { piece, part } of pieces(context, batch)) {
      const ids = Array.from(part, pick => piece.batch.first + pick)
      await feed.send(null, {
        op: 'register', batch: piece.batch, picks: part,
        x: Float64Array.from(ids, i => graded.x[i]!), y: Float64Array.from(ids, i => graded.y[i]!),
      }, piece.transfer, (reply) => {
        ids.forEach((frame, k) => {
          shifts.dx[frame] = reply.dx[k]!
          shifts.dy[frame] = reply.dy[k]!
          shifts.confidence[frame] = reply.confidence[k]!
          shifts.transfer[frame] = reply.transfer[k]!
          shifts.setAside[frame] = reply.sure[k] ? 0 : reasonCode('unsure')
        })
        progress.add(ids.length)
        finished.push(...ids)
      })
    }
    if (onDone && finished.length > 0) await onDone(finished.splice(0))
  }
  await feed.drain()
  progress.end()
}
