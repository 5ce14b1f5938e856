/**
 * What the coordinator asks of a compute worker. Plain data, so that the same requests go to a browser
 * worker, a Node thread or straight to a Computer in the same thread.
 */
import type { Samples } from '../decode/types'
import type { Mesh, PatchPlan } from '../patches/types'
import type { PreparePlan } from '../prepare/types'
import type { RegisterPlan } from '../register/types'
import type { ScorePlan } from '../score/types'
import type { CaptureFacts } from '../../shared/schemas/capture'
import type { Recipe, ResampleKernel } from '../../shared/schemas/recipe'
import type { Surveyed } from './survey-frames'

/** Consecutive frames in one buffer: `count` × planes × height × width samples from sample `offset`. The buffer may be shared. */
export interface Batch { first: number, count: number, samples: Samples, offset: number }

/** Everything that scoring and registering need to know, the same for every frame. */
export interface JudgeSetup { prepare: PreparePlan, score: ScorePlan | null, register: RegisterPlan | null, patches?: PatchPlan }

/** The image that frames are registered against, and the place of the target in it. */
export interface Reference { luminance: Float32Array, x: number, y: number }

/** Which frames of a batch take part, as numbers within the batch, ascending. */
type Picked = { batch: Batch, picks: Int32Array }

export type ComputeRequest =
  | { op: 'survey', facts: CaptureFacts, samples: Samples[], recipe: Recipe }
  | { op: 'setup', setup: JudgeSetup }
  | { op: 'grade', batch: Batch, register: boolean, averageScale: number }
  | ({ op: 'register', x: Float64Array, y: Float64Array } & Picked)
  | ({ op: 'patches', dx: Float64Array, dy: Float64Array } & Picked)
  | { op: 'sums', plan: PreparePlan, slots: number, planes: 1 | 3, scale: number, kernel: ResampleKernel, mesh?: Mesh | null }
  | ({ op: 'add', slot: Int32Array, dx: Float64Array, dy: Float64Array } & Picked)
  | ({ op: 'add-tiles' } & TilesToAdd & Picked)
  | { op: 'take', slots: number[] }
  | { op: 'peek', slots: number[] }
  | { op: 'put', slot: number, sum: Float64Array }
  | { op: 'rest' }
  | { op: 'take-average', size: number }

/** Tiles of the picked frames, frame after frame: `tiles[i]` of them for pick i, each with its slot and shift. */
export interface TilesToAdd { tiles: Int32Array, tile: Int32Array, slot: Int32Array, dx: Float64Array, dy: Float64Array }

/** Local results in the order of the picks, picks × places. */
export interface PatchReply { dx: Float32Array, dy: Float32Array, transfer: Float32Array }

/** Scores of a batch in columns; index = frame within the batch. */
export interface GradeReply {
  laplacian: Float64Array, peak: Float64Array, flux: Float64Array, background: Float64Array
  x: Float64Array, y: Float64Array
  /** Bits SATURATED, EMPTY, OUTSIDE of computer.ts. */
  flags: Uint8Array
  shifts: ShiftReply | null
}
/** Shifts in the order of the picks. */
export interface ShiftReply { dx: Float64Array, dy: Float64Array, confidence: Float64Array, transfer: Float64Array, sure: Uint8Array }
/** Sums of the asked slots, one after the other, as exact integers. */
export interface TakeReply { sums: (Int32Array | Float64Array)[] }

export type ComputeReply<T extends ComputeRequest = ComputeRequest> =
  T extends { op: 'survey' } ? Surveyed
    : T extends { op: 'grade' } ? GradeReply
      : T extends { op: 'register' } ? ShiftReply
        : T extends { op: 'patches' } ? PatchReply
          : T extends { op: 'take' } | { op: 'peek' } ? TakeReply
            : T extends { op: 'take-average' } ? { sum: Float64Array }
              : null
