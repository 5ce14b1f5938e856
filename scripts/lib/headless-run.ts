import { mkdir, mkdtemp, rename, rm, writeFile } from 'node:fs/promises'
import { dirname, join } from 'node:path'
import { recipeHash } from '../../shared/recipe/canonical'
import { keepCount } from '../../shared/schemas/run'
import { onSky } from '../../shared/astro/calibration'
import { measurePair } from '../../workers/run/measure'
import { openCapture } from '../../workers/decode/index'
import { Engine } from '../../workers/run/engine'
import { exportFiles } from '../../workers/run/export'
import { InlinePool } from '../../workers/run/pool'
import { runResult } from '../../workers/run/result'
import { displayRange } from '../../workers/run/stretch'
import { captureSources } from './file-source'
import { InputError, readInput, type HeadlessInput } from './headless-input'
import { calibrationJson } from './headless-drift'
import { nodePool } from './node-pool'

/** Bytes of decoded frames kept in memory. */
const BUDGET = 512 * 2 ** 20

/** Runs and writes; throws InputError or CaptureError for bad input, and then has written nothing. */
export async function run(argv: string[]): Promise<void> {
  const input = await readInput(argv)
  const { name, sources } = await captureSources(input.capture)
  const reader = await openCapture(name, sources)
  if (input.drift) {
    try {
      await publish(input.out, new Map([['calibration.json', await calibrationJson(reader, input.drift)]]))
    }
    finally {
      reader.close()
      for (const source of sources) await source.close()
    }
    return
  }
  const pool = input.workers > 1 ? nodePool(input.workers) : new InlinePool()
  const engine = new Engine(reader, { pool, budgetBytes: BUDGET, ...(input.blockFrames ? { blockFrames: input.blockFrames } : {}) })
  try {
    const state = await engine.run(input.recipe, null, () => undefined, new AbortController().signal)
    if (state.ranking.order.length === 0) throw new InputError(nothingLeft(state.refined.shifts.setAside.length, state.surveyed.survey.noSignalText))
    await publish(input.out, await results(engine, input))
  }
  finally {
    engine.close()
    pool.end()
    for (const source of sources) await source.close()
  }
}

function nothingLeft(frames: number, why: string): string {
  return `None of the ${frames} frames can be used${why ? `: ${why}` : '; all were set aside as empty, saturated or out of the field.'}`
}

async function results(engine: Engine, { recipe, measure }: HeadlessInput): Promise<Map<string, Uint8Array | string>> {
  const { stacker } = engine.state!
  const count = keepCount(recipe.keep.fraction, stacker.ranked)
  const hash = await recipeHash(recipe)
  const files = await exportFiles(engine, ['stack-fits', 'average-fits', 'frames-csv'], { recipe, stretch: displayRange(await stacker.stack(count)), fraction: recipe.keep.fraction, targetName: '', observer: '', recipeName: null })
  const result = await runResult(engine, recipe, hash)
  const named = new Map<string, Uint8Array | string>()
  const names: Record<string, string> = { stack: 'stack.fits', average: 'average.fits', frames: 'frames.csv' }
  for (const file of files) named.set(names[file.role]!, file.bytes)
  named.set('result.json', `${JSON.stringify({ ...result, timings: result.provenance.timings, ...await measures(engine, recipe.keep.fraction, measure) }, null, 2)}\n`)
  return named
}

/**
 * `measures`: each component against the first, on the screen, and with a calibration on the sky (then paDeg is the position
 * angle); empty where nothing could be measured. `measure`: the whole of it, with stability and warnings, or why there is none.
 */
async function measures(engine: Engine, fraction: number, wanted: HeadlessInput['measure']): Promise<object> {
  if (!wanted) return {}
  const measure = await measurePair(engine.state!, { components: wanted.components, fraction, fringes: wanted.components === 2 }, undefined, engine.frames)
  if (measure.kind !== 'measured') return { measures: [], measure }
  const { calibration } = wanted
  return { measures: measure.values.map(value => (calibration ? { ...value, screenPaDeg: value.paDeg, ...onSky(value, calibration) } : value)), measure, ...(calibration ? { calibration } : {}) }
}

/** Writes into a folder beside the target and renames file by file, so that no file is ever half there. */
async function publish(out: string, files: Map<string, Uint8Array | string>): Promise<void> {
  await mkdir(out, { recursive: true }).catch((reason: Error) => { throw new InputError(`The folder "${out}" cannot be made: ${reason.message}.`) })
  const beside = await mkdtemp(join(dirname(out), '.lull-')).catch((reason: Error) => { throw new InputError(`Nothing can be written beside "${out}": ${reason.message}.`) })
  try {
    for (const [name, data] of files) await writeFile(join(beside, name), data)
    for (const name of files.keys()) await rename(join(beside, name), join(out, name))
  }
  finally {
    await rm(beside, { recursive: true, force: true })
  }
}
