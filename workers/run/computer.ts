/**
 * One worker's arithmetic: prepares, scores, registers and adds frames. It keeps its buffers from request
 * to request and allocates nothing per frame. It knows nothing of threads: a browser worker, a Node thread
 * and the single-threaded pool all hold one.
 */
import { makeKernels, type Kernels } from '../kernels/index'
import { prepareColour, prepareLuminance, prepareRows } from '../prepare/frame'
import { createPatchRegistrar, type PatchRegistrar } from '../patches/registrar'
import { createTileAdder, type TileAdder } from '../patches/tiles'
import type { Mesh } from '../patches/types'
import type { PreparePlan } from '../prepare/types'
import { createRegistrar, emptyShift, type Registrar } from '../register/registrar'
import { createScorer, emptyScore, type Scorer } from '../score/scorer'
import { addSum, fixedSum, makeRoom, type FixedSum } from '../stack/fixed'
import type { ResampleKernel } from '../../shared/schemas/recipe'
import { AverageSum } from './average'
import { surveyFrames } from './survey-frames'
import type { Batch, ComputeReply, ComputeRequest, GradeReply, JudgeSetup, PatchReply, ShiftReply } from './messages'

type Of<Op extends ComputeRequest['op']> = Extract<ComputeRequest, { op: Op }>

/** What is needed to add prepared frames to sums. */
export interface Adder { mesh?: Mesh | null, plan: PreparePlan, planes: 1 | 3, scale: number, kernel: ResampleKernel, kernels: Kernels, frame: Float32Array, tiles: TileAdder | null }

/** An adder with memory for `sums` 32-bit sums; they are made with its kernels. */
export function makeAdder(how: Omit<Adder, 'kernels' | 'frame' | 'tiles'>, sums: number): Adder {
  const samples = how.plan.width * how.plan.height * how.planes
  const kernels = makeKernels((sums + 1) * (samples * 4 + 128), how.plan.width, how.plan.width * how.plan.height * how.plan.planes)
  return { ...how, kernels, frame: kernels.floats(samples), tiles: how.mesh ? createTileAdder(how.mesh) : null }
}

/** Bits of the flags column. */
export const SATURATED = 1
export const EMPTY = 2
export const OUTSIDE = 4

export class Computer {
  #setup: JudgeSetup | null = null
  #scorer: Scorer | null = null
  #registrar: Registrar | null = null
  #patches: PatchRegistrar | null = null
  #kernels: Kernels | null = null
  #luminance: Float32Array = new Float32Array(0)
  #score = emptyScore()
  #shift = emptyShift()
  #sums: { adder: Adder, slots: (FixedSum | null)[] } | null = null
  #average: AverageSum | null = null

  handle<T extends ComputeRequest>(request: T): ComputeReply<T> {
    return this.#answer(request) as ComputeReply<T>
  }

  #answer(request: ComputeRequest): ComputeReply {
    switch (request.op) {
      case 'survey': return surveyFrames(request.facts, request.samples, request.recipe)
      case 'setup': return this.#begin(request.setup)
      case 'grade': return this.#grade(request)
      case 'register': return this.#register(request)
      case 'patches': return this.#registerPatches(request)
      case 'sums': return this.#openSums(request)
      case 'add': return this.#add(request)
      case 'add-tiles': return this.#addTiles(request)
      case 'take': return { sums: request.slots.map(slot => this.#take(slot)) }
      case 'peek': return { sums: request.slots.map(slot => this.#peek(slot)) }
      case 'put': return this.#put(request.slot, request.sum)
      case 'rest': return this.#rest()
      case 'take-average': return this.#takeAverage(request.size)
    }
  }

  #begin(setup: JudgeSetup): null {
    this.#setup = setup
    const { width, height, planes } = setup.prepare
    // One frame's luminance and, while grading, the sum for the plain average.
    this.#kernels = makeKernels(width * height * (1 + planes) * 4 + 1024, width, width * height * planes)
    this.#luminance = this.#kernels.floats(width * height)
    this.#average = null
    this.#scorer = setup.score && createScorer(setup.score)
    this.#registrar = setup.register && createRegistrar(setup.register)
    this.#patches = setup.patches ? createPatchRegistrar(setup.patches) : null
    return null
  }

  #grade({ batch, register, averageScale }: Of<'grade'>): GradeReply {
    const n = batch.count
    const column = () => new Float64Array(n)
    const reply: GradeReply = {
      laplacian: column(), peak: column(), flux: column(), background: column(), x: column(), y: column(),
      flags: new Uint8Array(n), shifts: register ? shiftReply(n) : null,
    }
    const plan = this.#setup!.prepare
    const stride = plan.width * plan.height * plan.planes
    const score = this.#score
    for (let i = 0; i < n; i++) {
      const clipped = prepareLuminance(batch.samples, batch.offset + i * stride, plan, this.#luminance, this.#kernels!.convert)
      this.#scorer!.score(this.#luminance, clipped, score)
      reply.laplacian[i] = score.laplacian
      reply.peak[i] = score.peak
      reply.flux[i] = score.flux
      reply.background[i] = score.background
      reply.x[i] = score.x
      reply.y[i] = score.y
      reply.flags[i] = (score.saturated ? SATURATED : 0) | (score.empty ? EMPTY : 0) | (score.outOfField ? OUTSIDE : 0)
      if (reply.shifts) this.#shiftInto(reply.shifts, i, score.x, score.y)
    }
    this.#average ??= new AverageSum(stride, batch.samples, averageScale, this.#kernels!)
    this.#average.add(batch.samples, batch.offset, n)
    return reply
  }

  #register({ batch, picks, x, y }: Of<'register'>): ShiftReply {
    const reply = shiftReply(picks.length)
    const plan = this.#setup!.prepare
    const stride = plan.width * plan.height * plan.planes
    const reach = this.#registrar!.reach ?? Infinity
    for (let i = 0; i < picks.length; i++) {
      const middle = Math.round(y[i]!)
      const [from, to] = Number.isFinite(reach) ? [middle - reach, middle + reach] : [0, plan.height]
      prepareRows(batch.samples, batch.offset + picks[i]! * stride, plan, from, to, this.#luminance, this.#kernels!.convert)
      this.#shiftInto(reply, i, x[i]!, y[i]!)
    }
    return reply
  }

  #registerPatches({ batch, picks, dx, dy }: Of<'patches'>): PatchReply {
    const places = this.#setup!.patches!.places.length
    const column = () => new Float32Array(picks.length * places)
    const reply: PatchReply = { dx: column(), dy: column(), transfer: column() }
    const plan = this.#setup!.prepare
    const stride = plan.width * plan.height * plan.planes
    for (let i = 0; i < picks.length; i++) {
      prepareLuminance(batch.samples, batch.offset + picks[i]! * stride, plan, this.#luminance, this.#kernels!.convert)
      this.#patches!.register(this.#luminance, dx[i]!, dy[i]!, reply, i * places)
    }
    return reply
  }

  #shiftInto(reply: ShiftReply, i: number, x: number, y: number): void {
    this.#registrar!.register(this.#luminance, x, y, this.#shift)
    reply.dx[i] = this.#shift.dx
    reply.dy[i] = this.#shift.dy
    reply.confidence[i] = this.#shift.confidence
    reply.transfer[i] = this.#shift.transfer
    reply.sure[i] = this.#shift.sure ? 1 : 0
  }

  #openSums({ plan, slots, planes, scale, kernel, mesh }: Of<'sums'>): null {
    this.#sums = { adder: makeAdder({ plan, planes, scale, kernel, mesh }, slots), slots: new Array<FixedSum | null>(slots).fill(null) }
    return null
  }

  #add({ batch, picks, slot, dx, dy }: Of<'add'>): null {
    const { adder, slots } = this.#sums!
    for (let i = 0; i < picks.length; i++) {
      const sum = slots[slot[i]!] ??= fixedSum(adder.kernels.ints(adder.frame.length))
      makeRoom(sum)
      addFrame(adder, batch, picks[i]!, dx[i]!, dy[i]!, 1, sum.small)
    }
    return null
  }

  #addTiles({ batch, picks, tiles, tile, slot, dx, dy }: Of<'add-tiles'>): null {
    const { adder, slots } = this.#sums!
    for (let i = 0, k = 0; i < picks.length; i++) {
      prepareForAdding(adder, batch, picks[i]!)
      const touched = new Set<FixedSum>()
      for (const end = k + tiles[i]!; k < end; k++) {
        const sum = slots[slot[k]!] ??= fixedSum(adder.kernels.ints(adder.frame.length))
        // Tiles of one frame in one sum overlap in no pixel with more than the weight of one frame.
        if (!touched.has(sum)) makeRoom(sum)
        touched.add(sum)
        addTile(adder, tile[k]!, dx[k]!, dy[k]!, 1, sum.small)
      }
    }
    return null
  }

  /** The exact sum of a slot, which is given up. */
  #take(slot: number): Int32Array | Float64Array {
    const sum = this.#peek(slot)
    if (this.#sums) this.#sums.slots[slot] = null
    return sum
  }

  /** A copy of the exact sum of a slot, 32-bit while it fits. An untouched slot gives an empty array. */
  #peek(slot: number): Int32Array | Float64Array {
    const sum = this.#sums?.slots[slot]
    if (!sum) return new Int32Array(0)
    if (!sum.large) return sum.small.slice()
    const whole = new Float64Array(sum.small.length)
    addSum(whole, sum)
    return whole
  }

  /** Fills a slot with a sum that was saved. */
  #put(slot: number, sum: Float64Array): null {
    const { adder, slots } = this.#sums!
    slots[slot] = { ...fixedSum(adder.kernels.ints(adder.frame.length)), large: sum }
    return null
  }

  /** Gives the memory of sums and buffers back. */
  #rest(): null {
    this.#sums = null
    this.#scorer = null
    this.#registrar = null
    this.#patches = null
    return null
  }

  #takeAverage(size: number): { sum: Float64Array } {
    return { sum: this.#average?.take() ?? new Float64Array(size) }
  }
}

/** Prepares frame `pick` of a batch and adds it, shifted, to a sum of planes that the adder's kernels made. */
export function addFrame(adder: Adder, batch: Batch, pick: number, dx: number, dy: number, sign: 1 | -1, sum: Int32Array): void {
  prepareForAdding(adder, batch, pick)
  const { plan, planes, scale, kernel, kernels, frame } = adder
  const size = plan.width * plan.height
  for (let plane = 0; plane < planes; plane++) {
    kernels.addShifted(frame.subarray(plane * size, (plane + 1) * size), plan.width, plan.height, dx, dy, kernel, scale, sign,
      sum.subarray(plane * size, (plane + 1) * size))
  }
}

function shiftReply(n: number): ShiftReply {
  return { dx: new Float64Array(n), dy: new Float64Array(n), confidence: new Float64Array(n), transfer: new Float64Array(n), sure: new Uint8Array(n) }
}

/** Prepares frame `pick` of a batch in the adder's own plane memory. */
export function prepareForAdding({ plan, planes, kernels, frame }: Adder, batch: Batch, pick: number): void {
  const offset = batch.offset + pick * plan.width * plan.height * plan.planes
  if (planes === 1) prepareLuminance(batch.samples, offset, plan, frame, kernels.convert)
  else prepareColour(batch.samples, offset, plan, frame, kernels.convert)
}

/** Adds one tile of the frame that was prepared last, shifted, to a sum of planes. */
export function addTile({ plan, planes, scale, kernel, frame, tiles }: Adder, tile: number, dx: number, dy: number, sign: 1 | -1, sum: Int32Array): void {
  const size = plan.width * plan.height
  for (let plane = 0; plane < planes; plane++) {
    tiles!.add(frame.subarray(plane * size, (plane + 1) * size), tile, dx, dy, kernel, scale, sign, sum.subarray(plane * size, (plane + 1) * size))
  }
}
