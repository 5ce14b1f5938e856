import { makeMesh, tileCount, tileMiddle } from '../patches/mesh'
import { patchSpacing, patchWindow, placePatches } from '../patches/place'
import { agreement, centred, covariances, estimate, lessMean, meanWeights, ownVariances, relativeTransfer, type Agreement } from '../patches/settle'
import type { Field, PatchPlan, PatchTable, Place } from '../patches/types'
import type { Recipe } from '../../shared/schemas/recipe'
import type { FieldFigures } from '../../shared/schemas/run'
import type { ShiftTable } from './columns'
import { toAll, type PassContext } from './context'
import { Feed } from './feed'
import { picked, pieces } from './picked'
import type { Refined } from './refine-pass'
import type { Surveyed } from './survey-frames'

/** Frames on which it is decided whether the air differs over the field at all, spread over the capture. */
const TRIAL_FRAMES = 200
/** Fewest frames and patches from which anything can be told. */
const LEAST_FRAMES = 12
const LEAST_PATCHES = 6
/** How far from the frame's own shift a patch is looked for, px: the air moves parts of a field by a pixel or two. */
const REACH = 6
/** The air must be seen to differ by this many standard errors, and by this much, px, to be worth following. */
const LEAST_SURE = 3
const LEAST_DIFFERENCE = 0.12

export interface Patched { field: Field | null, figures: FieldFigures | null }
export const noPatches: Patched = { field: null, figures: null }

/**
 * Registers the parts of an extended target by themselves, where that helps: first some frames, to see whether the air differs over the
 * field; then all.
 */
export async function patchPass(context: PassContext, surveyed: Surveyed, refined: Refined, recipe: Recipe): Promise<Patched> {
  const { plan: { width, height }, survey } = surveyed
  const { patches, patchPlaces } = recipe.register
  const { shifts, reference } = refined
  const usable = Int32Array.from(shifts.setAside.keys()).filter(i => shifts.setAside[i] === 0)
  if (usable.length < LEAST_FRAMES) return noPatches
  const windowPx = patchWindow(width, height)
  const mesh = makeMesh(width, height, patchSpacing(width, height, windowPx))
  const middles = Array.from({ length: tileCount(mesh) }, (_, tile) => tileMiddle(mesh, tile))
  const noise = survey.noise / Math.sqrt(Math.max(1, recipe.register.referenceFraction * usable.length))
  const places = patchPlaces ?? placePatches(reference.luminance, width, height, middles, windowPx, noise)
  if (places.length < LEAST_PATCHES) return noPatches
  const plan: PatchPlan = { width, height, places, windowPx, reachPx: REACH, noise: survey.noise, reference: reference.luminance }
  const trial = usable.length > 1.5 * TRIAL_FRAMES ? spread(usable, TRIAL_FRAMES) : usable
  let table = await measure(context, surveyed, plan, shifts, trial)
  let air = airOf(table, shifts, trial, places, windowPx)
  const helps = air.moved.agreed.variance > LEAST_SURE * air.moved.agreed.error && Math.sqrt(2 * air.moved.agreed.variance) > LEAST_DIFFERENCE
  const figures = (used: boolean): FieldFigures => ({
    used, windowPx, places, differsPx: Math.sqrt(2 * Math.max(0, air.moved.agreed.variance)),
    differsErrPx: air.moved.agreed.variance > 0 ? Math.SQRT1_2 * air.moved.agreed.error / Math.sqrt(air.moved.agreed.variance) : 0, alikePx: air.moved.agreed.lengthPx,
  })
  if (!helps && patches === 'auto') return { field: null, figures: figures(false) }
  if (trial !== usable) {
    table = await measure(context, surveyed, plan, shifts, usable)
    air = airOf(table, shifts, usable, places, windowPx)
  }
  const count = shifts.dx.length
  const all = (values: Float32Array, { agreed, own, trust }: { agreed: Agreement, own: Float64Array, trust: Float64Array }) => {
    const out = new Float32Array(count * middles.length)
    const made = estimate(values, usable.length, places, middles, agreed, own, trust)
    usable.forEach((frame, k) => out.set(made.subarray(k * middles.length, (k + 1) * middles.length), frame * middles.length))
    return out
  }
  const told = figures(true)
  return {
    figures: told,
    field: {
      mesh, places, windowPx, differsPx: told.differsPx, differsErrPx: told.differsErrPx, alikePx: told.alikePx,
      dx: all(air.dx, air.moved), dy: all(air.dy, air.moved),
      quality: all(air.quality, air.sharp).map(value => Math.max(0.1, 1 + value)),
    },
  }
}

function spread(frames: Int32Array, wanted: number): Int32Array {
  return Int32Array.from({ length: wanted }, (_, i) => frames[Math.floor((i + 0.5) * frames.length / wanted)]!)
}

/** What patches say beyond the whole frame: less the mean of each frame's patches, less each patch's own median. */
function airOf(table: PatchTable, shifts: ShiftTable, which: Int32Array, places: Place[], windowPx: number) {
  const n = places.length
  const known = (values: Float32Array) => centred(values, table.count, n).values
  const [rawX, rawY, rawQuality] = [known(table.dx), known(table.dy), known(relativeTransfer(table, Float64Array.from(which, frame => shifts.transfer[frame]!), n))]
  const trust = meanWeights([rawX, rawY], table.count, n)
  const trustQuality = meanWeights([rawQuality], table.count, n)
  const dx = known(lessMean(rawX, table.count, n, trust))
  const dy = known(lessMean(rawY, table.count, n, trust))
  const quality = known(lessMean(rawQuality, table.count, n, trustQuality))
  const both = covariances([dx, dy], table.count, n)
  const ratios = covariances([quality], table.count, n)
  // Windows that overlap share noise: only those that hardly do say what the air does.
  const apart = 0.9 * windowPx
  const moved = { agreed: agreement(both, places, apart, trust), own: ownVariances(both, n), trust }
  const sharp = { agreed: agreement(ratios, places, apart, trustQuality), own: ownVariances(ratios, n), trust: trustQuality }
  return { dx, dy, quality, moved, sharp }
}

async function measure(context: PassContext, { plan }: Surveyed, patches: PatchPlan, shifts: ShiftTable, which: Int32Array): Promise<PatchTable> {
  const { pool, signal, progress } = context
  const n = patches.places.length
  const column = () => new Float32Array(which.length * n)
  const table: PatchTable = { count: which.length, dx: column(), dy: column(), transfer: column() }
  const rowOf = new Map([...which].map((frame, row) => [frame, row]))
  progress.begin('patches', 0, which.length)
  await toAll(pool, worker => pool.call(worker, { op: 'setup', setup: { prepare: plan, score: null, register: null, patches } }))
  const feed = new Feed(pool, signal)
  for await (const batch of picked(context, which)) {
    for (const { piece, part } of pieces(context, batch)) {
      const ids = Array.from(part, pick => piece.batch.first + pick)
      await feed.send(null, {
        op: 'patches', batch: piece.batch, picks: part, dx: Float64Array.from(ids, i => shifts.dx[i]!), dy: Float64Array.from(ids, i => shifts.dy[i]!),
      }, piece.transfer, (reply) => {
        ids.forEach((frame, k) => {
          for (const name of ['dx', 'dy', 'transfer'] as const) table[name].set(reply[name].subarray(k * n, (k + 1) * n), rowOf.get(frame)! * n)
        })
        progress.add(ids.length)
      })
    }
  }
  await feed.drain()
  progress.end()
  return table
}
