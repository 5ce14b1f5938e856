import type { StackImage } from '../api'
import { alignColours } from '../register/colours'
import type { ColourShifts } from '../../shared/schemas/run'
import type { PreparePlan } from '../prepare/types'
import { coveredBy, FIXED_FRAMES } from '../stack/accumulate'
import { coverageCounts, coverageMarks, markCovered } from '../stack/coverage'
import { addInto } from '../stack/fixed'
import { fillUncovered, meanOf, type Counts } from '../stack/mean'
import type { ShiftTable } from './columns'
import { tileCount } from '../patches/mesh'
import { tileCoverage } from '../patches/tiles'
import { tileShift, type TileOrder } from './tile-order'
import { addFrame, addTile, makeAdder, prepareForAdding, type Adder } from './computer'
import type { FrameStore } from './frames'
import type { Ladder } from './ladder-pass'

/** Samples that may be prepared while a slider is dragged. */
const LIGHT_SAMPLES = 4e6

/**
 * Stacks of exactly the best n frames, for any n. It starts from whichever exact sum is nearest, the rung
 * below, the rung above or the stack before, and adds or takes away the frames between; sums of integers
 * come out the same by any way.
 */
export class Stacker {
  readonly #ladder: Ladder
  readonly #order: Int32Array
  readonly #shifts: ShiftTable
  readonly #frames: FrameStore
  readonly #adder: Adder
  readonly #sum: Float64Array
  readonly #small: Int32Array
  readonly #tiles: TileOrder | null
  #colours: ColourShifts | null = null
  #count = 0
  #queue: Promise<unknown> = Promise.resolve()

  constructor(ladder: Ladder, order: Int32Array, shifts: ShiftTable, frames: FrameStore, plan: PreparePlan, tiles: TileOrder | null = null) {
    const size = ladder.planes * ladder.width * ladder.height
    this.#ladder = ladder
    this.#order = order
    this.#shifts = shifts
    this.#frames = frames
    this.#adder = makeAdder({ plan, planes: ladder.planes, scale: ladder.scale, kernel: ladder.kernel, mesh: tiles?.field.mesh ?? null }, 1)
    this.#tiles = tiles
    this.#sum = new Float64Array(size)
    this.#small = this.#adder.kernels.ints(size)
  }

  /** How the colour planes of every stack from now on are laid on green; null leaves them as they are. */
  set colours(shifts: ColourShifts | null) { this.#colours = shifts }
  get colours(): ColourShifts | null { return this.#colours }

  /** Frames that can be stacked. */
  get ranked(): number { return this.#order.length }

  /** The mean of the best `count` frames; count is clamped to what there is. */
  stack(count: number, signal?: AbortSignal): Promise<StackImage> {
    const wanted = Math.max(0, Math.min(this.ranked, Math.round(count)))
    const made = this.#queue.then(async () => {
      signal?.throwIfAborted()
      await this.#moveTo(wanted, signal)
      return this.#image(wanted)
    })
    this.#queue = made.catch(() => undefined)
    return made
  }

  /** The count nearest to `count` whose stack needs no reading: itself where all frames between are in memory, else that of a rung. */
  nearAtHand(count: number): number {
    const wanted = Math.max(0, Math.min(this.ranked, Math.round(count)))
    const from = this.#nearest(wanted).count
    const between = new Set<number>()
    for (const order of this.#tiles?.orders ?? [this.#order]) {
      for (let place = Math.min(from, wanted); place < Math.max(from, wanted); place++) between.add(order[place]!)
    }
    // Tiles of many frames may lie between two stacks: where preparing them all would be felt, a rung is shown instead.
    const light = !this.#tiles || between.size * this.#small.length < LIGHT_SAMPLES
    if (light && [...between].every(frame => this.#frames.holds(frame))) return wanted
    return this.#ladder.counts.reduce((best, rung) => Math.abs(rung - wanted) < Math.abs(best - wanted) ? rung : best, this.#ladder.counts[0]!)
  }

  /**
   * Means of the best `count` frames in groups that follow each other in time, of as equal a size as can be: independent looks
   * at the same target. `visit` gets each mean; the samples are its own.
   */
  blocks(count: number, groups: number, visit: (image: StackImage, block: number) => void, signal?: AbortSignal): Promise<void> {
    const wanted = Math.max(0, Math.min(this.ranked, Math.round(count)))
    const inTime = this.#order.slice(0, wanted).sort()
    const made = this.#queue.then(async () => {
      for (let block = 0; block < groups; block++) {
        const frames = inTime.subarray(Math.floor(block * wanted / groups), Math.floor((block + 1) * wanted / groups))
        if (frames.length > 0) visit(await this.#meanOf(frames, signal), block)
      }
    })
    this.#queue = made.catch(() => undefined)
    return made
  }

  async #meanOf(frames: Int32Array, signal?: AbortSignal): Promise<StackImage> {
    const { width, height, planes, scale, kernel } = this.#ladder
    const sum = new Float64Array(this.#small.length)
    const marks = coverageMarks(width, height)
    const tiles = this.#tiles
    const count = tiles ? tileCount(tiles.field.mesh) : 0
    this.#small.fill(0)
    let room = 0
    for (const frame of frames) {
      signal?.throwIfAborted()
      const [dx, dy] = [this.#shifts.dx[frame]!, this.#shifts.dy[frame]!]
      const batch = await this.#frames.frame(frame, signal)
      if (tiles) {
        prepareForAdding(this.#adder, batch, 0)
        for (let tile = 0; tile < count; tile++) {
          const shift = tileShift(tiles.field, count, frame, tile, dx, dy)
          addTile(this.#adder, tile, shift.dx, shift.dy, 1, this.#small)
        }
      }
      else {
        addFrame(this.#adder, batch, 0, dx, dy, 1, this.#small)
        markCovered(marks, width, coveredBy(kernel, width, height, dx, dy), 1)
      }
      if (++room === FIXED_FRAMES) {
        addInto(sum, this.#small)
        this.#small.fill(0)
        room = 0
      }
    }
    addInto(sum, this.#small)
    const covered = tiles
      ? tileCoverage(tiles.field.mesh, kernel, (tile, mark) => {
          for (const frame of frames) {
            const { dx, dy } = tileShift(tiles.field, count, frame, tile, this.#shifts.dx[frame]!, this.#shifts.dy[frame]!)
            mark(dx, dy)
          }
        })
      : coverageCounts(marks, width, height)
    const samples = meanOf(sum, covered, scale, planes)
    fillUncovered(samples, covered, width, height, planes)
    return this.#aligned({ width, height, planes, samples, count: frames.length, restored: false })
  }

  async #moveTo(wanted: number, signal?: AbortSignal): Promise<void> {
    const from = this.#nearest(wanted)
    if (from.sum && from.sum !== this.#sum) this.#sum.set(from.sum)
    else if (!from.sum) this.#sum.fill(0)
    this.#count = from.count
    while (this.#count !== wanted) {
      const step = Math.max(-FIXED_FRAMES, Math.min(FIXED_FRAMES, wanted - this.#count))
      await this.#move(step, signal)
    }
  }

  /** Adds the next `step` frames of the order, or takes the last -step away. All or nothing. */
  async #move(step: number, signal?: AbortSignal): Promise<void> {
    const sign = step > 0 ? 1 : -1
    const first = step > 0 ? this.#count : this.#count + step
    this.#small.fill(0)
    if (this.#tiles) await this.#addTiles(this.#tiles, first, first + Math.abs(step), sign, signal)
    else for (let place = first; place < first + Math.abs(step); place++) {
      const frame = this.#order[place]!
      const batch = await this.#frames.frame(frame, signal)
      addFrame(this.#adder, batch, 0, this.#shifts.dx[frame]!, this.#shifts.dy[frame]!, sign, this.#small)
    }
    addInto(this.#sum, this.#small)
    this.#count += step
  }

  /** Adds the tiles of places [from, to) of every tile's order, frame by frame. */
  async #addTiles({ field, orders }: TileOrder, from: number, to: number, sign: 1 | -1, signal?: AbortSignal): Promise<void> {
    const byFrame = new Map<number, number[]>()
    orders.forEach((order, tile) => {
      for (let place = from; place < to; place++) {
        const list = byFrame.get(order[place]!)
        if (list) list.push(tile)
        else byFrame.set(order[place]!, [tile])
      }
    })
    for (const [frame, list] of byFrame) {
      signal?.throwIfAborted()
      prepareForAdding(this.#adder, await this.#frames.frame(frame, signal), 0)
      for (const tile of list) {
        const { dx, dy } = tileShift(field, orders.length, frame, tile, this.#shifts.dx[frame]!, this.#shifts.dy[frame]!)
        addTile(this.#adder, tile, dx, dy, sign, this.#small)
      }
    }
  }

  #nearest(wanted: number): { count: number, sum: Float64Array | null } {
    let best: { count: number, sum: Float64Array | null } = { count: 0, sum: null }
    const consider = (count: number, sum: Float64Array) => {
      if (Math.abs(count - wanted) < Math.abs(best.count - wanted)) best = { count, sum }
    }
    consider(this.#count, this.#sum)
    this.#ladder.counts.forEach((count, k) => consider(count, this.#ladder.sums[k]!))
    return best
  }

  #image(count: number): StackImage {
    const { width, height, planes, scale } = this.#ladder
    const covered = this.coverage(count)
    const samples = meanOf(this.#sum, covered, scale, planes)
    fillUncovered(samples, covered, width, height, planes)
    return this.#aligned({ width, height, planes, samples, count, restored: false })
  }

  #aligned(image: StackImage): StackImage {
    if (!this.#colours || image.planes !== 3) return image
    alignColours(image.samples, image.width, image.height, this.#colours)
    return { ...image, colours: this.#colours }
  }

  /** How many of the best `count` frames cover each pixel; `every` second one from the first for a half. */
  coverage(count: number, every: 1 | 2 = 1): Counts {
    const { width, height, kernel } = this.#ladder
    const tiles = this.#tiles
    if (tiles) {
      return tileCoverage(tiles.field.mesh, kernel, (tile, mark) => {
        for (let place = 0; place < count; place += every) {
          const frame = tiles.orders[tile]![place]!
          const { dx, dy } = tileShift(tiles.field, tiles.orders.length, frame, tile, this.#shifts.dx[frame]!, this.#shifts.dy[frame]!)
          mark(dx, dy)
        }
      })
    }
    const marks = coverageMarks(width, height)
    for (let place = 0; place < count; place += every) {
      const frame = this.#order[place]!
      markCovered(marks, width, coveredBy(kernel, width, height, this.#shifts.dx[frame]!, this.#shifts.dy[frame]!), 1)
    }
    return coverageCounts(marks, width, height)
  }

  /** The two half stacks (odd ranks, even ranks) of rung k; null where a half would be empty. */
  halves(rung: number): [Float32Array, Float32Array] | null {
    const { counts, sums, halves, scale, planes } = this.#ladder
    if (counts[rung]! < 2) return null
    const all = this.coverage(counts[rung]!)
    const first = this.coverage(counts[rung]!, 2)
    const one = meanOf(new Float64Array(halves[rung]!), first, scale, planes)
    const second = all
    for (let i = 0; i < second.length; i++) second[i]! -= first[i]!
    const rest = sums[rung]!.slice()
    const half = halves[rung]!
    for (let i = 0; i < rest.length; i++) rest[i]! -= half[i]!
    const other = meanOf(rest, second, scale, planes)
    const { width, height } = this.#ladder
    fillUncovered(one, first, width, height, planes)
    fillUncovered(other, second, width, height, planes)
    return [one, other]
  }

  /** Frames in the stack of a rung. */
  countOf(rung: number): number { return this.#ladder.counts[rung] ?? 0 }

  /** The rung whose count is nearest to `count` and at most it, or the first. */
  rungBelow(count: number): number {
    let rung = 0
    this.#ladder.counts.forEach((n, k) => { if (n <= count) rung = k })
    return rung
  }
}
