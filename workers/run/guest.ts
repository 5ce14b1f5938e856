/**
 * A filed run without its capture: the ladder file gives the stack of any rung by one range request, and the
 * frame table gives the strip. Counts snap to rungs, so that the count shown is what is in the image.
 */
import type { FiledRun, FrameColumns, GuestApi, StackImage } from '../api'
import { cubeLayout, decodeCubeFrame, type CubeLayout } from '../encode/fits'
import { overshootOf } from '../restore/guards'
import { planByHand } from '../restore/plan'
import { reportOf } from '../restore/report'
import { restore } from '../restore/restore'
import { httpSource } from '../source/http'
import type { ByteSource } from '../source/types'
import type { StackFigures } from '../../shared/schemas/run'
import { breathe } from './pool'
import { columnsFromCsv } from './frames-table'

const notTheLadder = 'The ladder of this run cannot be read: its file is not the expected one.'

/** Rungs kept in memory; a guest drags back and forth over the same few. */
const KEPT = 24

export class GuestRun implements GuestApi {
  #run: FiledRun | null = null
  #source: ByteSource | null = null
  #layout: CubeLayout | null = null
  /** Counts that can be shown, ascending: the rungs, and the filed stack's own. */
  #counts: number[] = []
  #planes = new Map<number, Promise<Float32Array>>()

  async open(run: FiledRun): Promise<{ counts: number[], columns: FrameColumns }> {
    await this.close()
    this.#run = run
    this.#source = httpSource(run.ladderUrl, 'ladder.fits', run.ladderBytes)
    const [layout, table] = await Promise.all([
      layoutOf(this.#source),
      fetch(run.framesUrl, { credentials: 'same-origin' }).then(answer => answer.ok ? answer.text() : Promise.reject(new Error(`The frame table could not be read (${answer.status}). Load the page again.`))),
    ])
    const { ladder } = run.result
    if (layout.count !== ladder.counts.length || layout.width !== ladder.width || layout.height !== ladder.height || layout.planes !== ladder.planes) throw new Error(notTheLadder)
    this.#layout = layout
    const filed = run.result.keep.count
    this.#counts = run.stackUrl && filed > 0 && !ladder.counts.includes(filed) ? [...ladder.counts, filed].sort((a, b) => a - b) : ladder.counts.slice()
    return { counts: this.#counts.slice(), columns: columnsFromCsv(table) }
  }

  async stack(count: number, restored: boolean): Promise<StackImage> {
    const { result } = this.#need()
    const { width, height, planes } = result.ladder
    const shown = this.#counts[nearestRung(this.#counts, count)]!
    const samples = await this.#plane(shown)
    const image: StackImage = { width, height, planes, samples: samples.slice(), count: shown, restored: false, ...(result.colours ? { colours: result.colours } : {}) }
    if (!restored) return image
    const plan = result.restoration ?? planByHand(result.recipe.restore, result.kind, image.samples, width, height, planes)
    if (plan.method === 'nothing') return { ...image, restoration: reportOf(plan, null, null, 0) }
    const { samples: sharper, rounds } = await restore(image.samples, width, height, planes, plan, breathe)
    return { ...image, samples: sharper, restored: true, restoration: reportOf(plan, overshootOf(image.samples, sharper, width, height, planes, false), null, rounds) }
  }

  /** The filed figures of the proof that is nearest; a guest has no frames to compute others from. */
  async figures(count: number): Promise<StackFigures> {
    const { result } = this.#need()
    if (count === result.figures.count) return result.figures
    const all = [...result.proofs, result.figures]
    const at = nearestRung(all.map(figures => figures.count), count)
    return all[at]!
  }

  async average(): Promise<StackImage | null> {
    const { averageUrl, result } = this.#need()
    if (!averageUrl) return null
    const answer = await fetch(averageUrl, { credentials: 'same-origin' })
    if (!answer.ok) return null
    const bytes = new Uint8Array(await answer.arrayBuffer())
    const layout = cubeLayout(bytes)
    if (!layout) return null
    const planes = layout.count === 3 ? 3 : 1
    const samples = decodeCubeFrame(bytes.subarray(layout.dataOffset), { ...layout, planes, count: 1 })
    return { width: layout.width, height: layout.height, planes, samples, count: result.average.count, restored: false }
  }

  async close(): Promise<void> {
    this.#source = null
    this.#layout = null
    this.#run = null
    this.#planes.clear()
  }

  alive(): Promise<boolean> { return Promise.resolve(true) }

  #plane(count: number): Promise<Float32Array> {
    const kept = this.#planes.get(count)
    this.#planes.delete(count)
    const plane = kept ?? this.#read(count)
    this.#planes.set(count, plane)
    plane.catch(() => this.#planes.delete(count))
    if (this.#planes.size > KEPT) this.#planes.delete(this.#planes.keys().next().value!)
    return plane
  }

  /** One rung by one range of the file, or the filed stack by its own. */
  async #read(count: number): Promise<Float32Array> {
    const rung = this.#need().result.ladder.counts.indexOf(count)
    if (rung < 0) return this.#readFiledStack()
    const { dataOffset, frameBytes } = this.#layout!
    return decodeCubeFrame(await this.#source!.read(dataOffset + rung * frameBytes, frameBytes), this.#layout!)
  }

  async #readFiledStack(): Promise<Float32Array> {
    const { stackUrl, result: { ladder } } = this.#need()
    const answer = await fetch(stackUrl!, { credentials: 'same-origin' })
    if (!answer.ok) throw new Error(`The filed stack could not be read (${answer.status}). Load the page again.`)
    const bytes = new Uint8Array(await answer.arrayBuffer())
    const layout = cubeLayout(bytes)
    // A file of one stack: its planes, for colour, count as frames of a mono cube.
    if (!layout || layout.width !== ladder.width || layout.height !== ladder.height || layout.count * layout.planes !== ladder.planes) throw new Error('The filed stack has another size than its ladder. Tell the owner of the run.')
    return decodeCubeFrame(bytes.subarray(layout.dataOffset), { ...layout, planes: ladder.planes, count: 1 })
  }

  #need(): FiledRun {
    if (!this.#run) throw new Error('No run is open.')
    return this.#run
  }
}

/** Where the planes of the ladder lie. The header is read in steps, because its length is known only at its end. */
async function layoutOf(source: ByteSource): Promise<CubeLayout> {
  for (let bytes = 8 * 2880; bytes <= 128 * 2880; bytes *= 2) {
    const layout = cubeLayout(await source.read(0, Math.min(bytes, source.size)))
    if (layout) return layout
    if (bytes >= source.size) break
  }
  throw new Error(notTheLadder)
}

/** Index of the count nearest to the wanted one, the smaller on a tie. */
export function nearestRung(counts: readonly number[], wanted: number): number {
  let best = 0
  counts.forEach((count, k) => { if (Math.abs(count - wanted) < Math.abs(counts[best]! - wanted)) best = k })
  return best
}
