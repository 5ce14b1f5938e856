import type { CoreApi, ExportFile, ExportKind, StackImage } from '../api'
import { framesCsv } from '../encode/csv'
import { encodeFits, textCards, type FitsCard } from '../encode/fits'
import { encodePng } from '../encode/png'
import { toDisplay8, toUint16 } from '../encode/samples'
import { stackCards } from '../encode/stack-cards'
import { encodeTiff16 } from '../encode/tiff'
import { recipeHash } from '../../shared/recipe/canonical'
import { recipeText } from '../../shared/recipe/sentences'
import { keepCount } from '../../shared/schemas/run'
import { frameColumns } from './columns'
import type { Engine } from './engine'
import { proofSheet, reduced } from './pictures'
import { lullVersion } from './version'

export type ExportContext = Parameters<CoreApi['export']>[1]

/** Files of a finished run, in the order asked. Throws where no run is finished. */
export async function exportFiles(engine: Engine, kinds: ExportKind[], context: ExportContext): Promise<ExportFile[]> {
  const exporter = new Exporter(engine, context)
  const files: ExportFile[] = []
  for (const kind of kinds) files.push(await exporter.file(kind))
  return files
}

const types = { fits: 'application/fits', tif: 'image/tiff', png: 'image/png', csv: 'text/csv', json: 'application/json' } as const

class Exporter {
  readonly #engine: Engine
  readonly #context: ExportContext
  readonly #count: number
  readonly #base: string

  constructor(engine: Engine, context: ExportContext) {
    this.#engine = engine
    this.#context = context
    if (!engine.state) throw new Error('Nothing is stacked yet: run the recipe first.')
    this.#count = keepCount(context.fraction, engine.state.stacker.ranked)
    this.#base = safeName(context.targetName || engine.reader.facts.name)
  }

  async file(kind: ExportKind): Promise<ExportFile> {
    switch (kind) {
      case 'stack-fits': return this.#named('stack', 'stack', 'fits', await this.#stackFits())
      case 'average-fits': return this.#named('average', 'average', 'fits', await this.#averageFits())
      case 'ladder-fits': return this.#named('ladder', 'ladder', 'fits', await this.#ladderFits())
      case 'stack-tiff16': return this.#named(kind, 'stack', 'tif', await this.#tiff())
      case 'stack-png16': return this.#named(kind, 'stack-16bit', 'png', await this.#png16())
      case 'view-png8': return this.#named('preview', 'view', 'png', await this.#view(await this.#shown()))
      case 'thumbnail-png': return this.#named('thumbnail', 'thumbnail', 'png', await this.#view(reduced(await this.#shown(), 320)))
      case 'proofs-png': return this.#named('proofs', 'proofs', 'png', await this.#proofs())
      case 'frames-csv': return this.#named('frames', 'frames', 'csv', text(framesCsv(this.#columns(), this.#count)))
      case 'recipe-json': return this.#named('recipe', 'recipe', 'json', json(this.#context.recipe))
      case 'facts-json': return this.#named('facts', 'facts', 'json', json(this.#engine.reader.facts))
    }
  }

  #named(role: string, what: string, extension: keyof typeof types, bytes: Uint8Array): ExportFile {
    return { role, name: `${this.#base}-${what}.${extension}`, type: types[extension], bytes }
  }

  #columns() {
    const { graded, refined, ranking, measure } = this.#engine.state!
    return frameColumns(graded.table, refined.shifts, ranking.rank, measure, null)
  }

  /** The stack as displayed: restored where the recipe says so. */
  #shown(): Promise<StackImage> { return this.#engine.stack(this.#count, true) }

  async #stackFits(): Promise<Uint8Array> {
    const { width, height, planes, samples } = await this.#engine.stack(this.#count, false)
    const cards = await this.#cards({ count: this.#count, fraction: this.#context.fraction })
    return encodeFits({ width, height, depth: planes === 3 ? [3] : [], data: samples, cards: [...cards, ...textCards('HISTORY', 'The samples are the plain mean of the kept frames before any restoration.')] })
  }

  async #averageFits(): Promise<Uint8Array> {
    const { width, height, planes, samples, count } = this.#engine.average()
    const cards = await this.#cards(null)
    return encodeFits({ width, height, depth: planes === 3 ? [3] : [], data: samples, cards: [...cards, ...textCards('HISTORY', `The samples are the unregistered mean of ${count} frames as stored, before any repair.`)] })
  }

  async #ladderFits(): Promise<Uint8Array> {
    const { ladder, stacker } = this.#engine.state!
    const { width, height, planes, counts } = ladder
    const size = width * height * planes
    const data = new Float32Array(size * counts.length)
    for (const [k, count] of counts.entries()) data.set((await stacker.stack(count)).samples, k * size)
    const cards = await this.#cards(null)
    return encodeFits({ width, height, depth: planes === 3 ? [3, counts.length] : [counts.length], data, cards: [...cards, ...textCards('HISTORY', `Each plane is the mean of the best frames; counts: ${counts.join(' ')}.`)] })
  }

  async #tiff(): Promise<Uint8Array> {
    const image = await this.#shown()
    return encodeTiff16({ width: image.width, height: image.height, channels: image.planes, data: this.#sixteen(image), description: await this.#description() })
  }

  async #png16(): Promise<Uint8Array> {
    const image = await this.#shown()
    return await encodePng({ width: image.width, height: image.height, channels: image.planes, bitDepth: 16, data: this.#sixteen(image), text: { Description: await this.#description() } })
  }

  /** 16 bit over the detector's whole range, so that values of several files compare; float data over their own. */
  #sixteen({ samples, width, height, planes }: StackImage): Uint16Array {
    const { sampleKind, bitDepth } = this.#engine.reader.facts
    const high = sampleKind === 'float32' ? samples.reduce((most, value) => Math.max(most, value), -Infinity) : 2 ** bitDepth - 1
    const low = sampleKind === 'float32' ? samples.reduce((least, value) => Math.min(least, value), Infinity) : 0
    return toUint16(samples, width * height, planes, low, high)
  }

  #view({ width, height, planes, samples }: StackImage): Promise<Uint8Array> {
    return encodePng({ width, height, channels: planes, bitDepth: 8, data: toDisplay8(samples, width * height, planes, this.#context.stretch) })
  }

  async #proofs(): Promise<Uint8Array> {
    const sheet = await proofSheet(this.#engine)
    return this.#view(sheet)
  }

  async #description(): Promise<string> {
    return `${recipeText(this.#context.recipe, this.#chosen())} Recipe ${await recipeHash(this.#context.recipe)}. ${this.#count} frames. Lull ${lullVersion}.`
  }

  #chosen() {
    const { measure, surveyed: { score: { blurPx, windowPx }, survey: { kind } } } = this.#engine.state!
    return { rankBy: measure, blurPx, windowPx, kind }
  }

  async #cards(kept: { count: number, fraction: number } | null): Promise<FitsCard[]> {
    const { recipe, recipeName, targetName, observer } = this.#context
    return stackCards({
      facts: this.#engine.reader.facts, recipe, recipeHash: await recipeHash(recipe), recipeName, chosen: this.#chosen(),
      targetName, observer, lullVersion, kept, seconds: this.#times(kept?.count ?? null),
    })
  }

  /** First, last and mean time of the kept frames, or of all. */
  #times(count: number | null): { first: number, last: number, mean: number } | null {
    const { seconds } = this.#engine.reader
    if (!seconds || seconds.length === 0) return null
    const order = this.#engine.state!.ranking.order
    const times = count === null ? seconds : Float64Array.from(order.subarray(0, count), frame => seconds[frame]!)
    if (times.length === 0) return null
    let first = Infinity, last = -Infinity, sum = 0
    for (const time of times) {
      first = Math.min(first, time)
      last = Math.max(last, time)
      sum += time
    }
    return { first, last, mean: sum / times.length }
  }
}

const text = (value: string) => new TextEncoder().encode(value)
const json = (value: unknown) => text(`${JSON.stringify(value, null, 2)}\n`)

/** A file name from a title: letters, digits, dash, dot; never empty, never hidden. */
export function safeName(title: string): string {
  return title.replace(/\.[A-Za-z0-9]{1,5}$/, '').normalize('NFKD').replace(/[^\p{L}\p{N}]+/gu, '-').replace(/^-+|-+$/g, '').slice(0, 80) || 'capture'
}
