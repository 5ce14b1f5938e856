import { readFile, stat } from 'node:fs/promises'
import { resolve } from 'node:path'
import { parseArgs } from 'node:util'
import { readRecipe } from '../../shared/recipe/migrate'
import { withRecipeValue } from '../../shared/recipe/sentences'
import { skyCalibrationSchema, type SkyCalibration } from '../../shared/astro/calibration'
import { defaultRecipe, type Recipe } from '../../shared/schemas/recipe'

/** Something the user gave cannot be used; the message is one plain line. */
export class InputError extends Error {
  override name = 'InputError'
}

export interface HeadlessInput {
  /** Path of a file or a folder. */
  capture: string
  out: string
  recipe: Recipe
  workers: number
  blockFrames: number | undefined
  /** A drift capture to calibrate by instead of a capture to stack. */
  drift: { declinationDeg: number, parity: 'normal' | 'mirrored' | null } | null
  /** Stars to measure on the stack, and the calibration to do it with. */
  measure: { components: 2 | 3, calibration: SkyCalibration | null } | null
}

const USAGE = 'Usage: npm run --silent headless -- CAPTURE --out DIR [--recipe FILE.json] [--keep 0.1] [--set path=value …] [--workers N] [--measure 2|3 [--calibration FILE.json]], or -- CAPTURE --drift --dec DEG [--parity normal|mirrored] --out DIR'

export async function readInput(argv: string[]): Promise<HeadlessInput> {
  const { values, positionals } = parse(argv)
  if (positionals.length !== 1) throw new InputError(`Name one capture, a file or a folder. ${USAGE}`)
  if (!values.out) throw new InputError(`Say where the results go with --out DIR. ${USAGE}`)
  return {
    capture: resolve(positionals[0]!),
    out: await freeFolder(resolve(values.out)),
    recipe: await recipeOf(values),
    workers: whole(values.workers ?? '1', '--workers', 1, 64),
    drift: driftOf(values),
    measure: await measureOf(values),
    blockFrames: values['block-frames'] === undefined ? undefined : whole(values['block-frames'], '--block-frames', 1, 100_000),
  }
}

function parse(argv: string[]) {
  try {
    return parseArgs({
      args: argv, allowPositionals: true,
      options: {
        out: { type: 'string' }, recipe: { type: 'string' }, keep: { type: 'string' }, set: { type: 'string', multiple: true },
        workers: { type: 'string' }, 'block-frames': { type: 'string' },
        drift: { type: 'boolean' }, dec: { type: 'string' }, parity: { type: 'string' }, measure: { type: 'string' }, calibration: { type: 'string' },
      },
    })
  }
  catch (reason) {
    throw new InputError(`${(reason as Error).message} ${USAGE}`)
  }
}

function driftOf({ drift, dec, parity }: { drift?: boolean, dec?: string, parity?: string }): HeadlessInput['drift'] {
  if (!drift) {
    if (dec !== undefined || parity !== undefined) throw new InputError(`--dec and --parity belong to --drift. ${USAGE}`)
    return null
  }
  if (dec === undefined) throw new InputError(`A drift needs the declination of its star: --dec DEG. ${USAGE}`)
  const declinationDeg = number(dec)
  if (Math.abs(declinationDeg) > 90) throw new InputError(`A declination lies between −90° and 90°; "${dec}" does not.`)
  if (parity !== undefined && parity !== 'normal' && parity !== 'mirrored') throw new InputError(`--parity is "normal" or "mirrored", not "${parity}".`)
  return { declinationDeg, parity: parity ?? null }
}

async function measureOf({ measure, calibration, drift }: { measure?: string, calibration?: string, drift?: boolean }): Promise<HeadlessInput['measure']> {
  if (measure === undefined) {
    if (calibration !== undefined) throw new InputError(`--calibration belongs to --measure. ${USAGE}`)
    return null
  }
  if (drift) throw new InputError('--drift and --measure are two different jobs: run them one after the other.')
  if (measure !== '2' && measure !== '3') throw new InputError(`--measure takes 2 or 3 stars, not "${measure}".`)
  const components = measure === '2' ? 2 : 3
  if (calibration === undefined) return { components, calibration: null }
  const text = await readFile(calibration, 'utf8').catch(() => { throw new InputError(`The calibration "${calibration}" cannot be read.`) })
  const data = skyCalibrationSchema.safeParse(parsed(text, calibration, 'calibration'))
  if (!data.success) throw new InputError(`The calibration "${calibration}" cannot be used: ${data.error.issues[0]!.path.join('.') || 'it'}: ${data.error.issues[0]!.message}.`)
  return { components, calibration: data.data }
}

/** Results replace those of an earlier run, but never anything else. */
async function freeFolder(out: string): Promise<string> {
  const info = await stat(out).catch(() => null)
  if (info && !info.isDirectory()) throw new InputError(`"${out}" is a file; --out needs a folder.`)
  return out
}

async function recipeOf(values: { recipe?: string, keep?: string, set?: string[] }): Promise<Recipe> {
  let recipe: Recipe = defaultRecipe
  try {
    if (values.recipe !== undefined) recipe = readRecipe(parsed(await readFile(values.recipe, 'utf8').catch(() => { throw new InputError(`The recipe "${values.recipe}" cannot be read.`) }), values.recipe))
    if (values.keep !== undefined) recipe = withRecipeValue(recipe, 'keep.fraction', number(values.keep))
    for (const setting of values.set ?? []) {
      const [path, ...rest] = setting.split('=')
      if (!path || rest.length === 0) throw new InputError(`"${setting}" is not of the form path=value.`)
      recipe = withRecipeValue(recipe, path, valueOf(rest.join('=')))
    }
    return readRecipe(recipe)
  }
  catch (reason) {
    if (reason instanceof InputError) throw reason
    throw new InputError((reason as Error).message)
  }
}

function parsed(text: string, name: string, what = 'recipe'): unknown {
  try {
    return JSON.parse(text)
  }
  catch {
    throw new InputError(`The ${what} "${name}" is not JSON.`)
  }
}

function number(text: string): number {
  const value = Number(text)
  if (text.trim() === '' || !Number.isFinite(value)) throw new InputError(`"${text}" is not a number.`)
  return value
}

/** JSON where it is JSON, else the text itself, so that register.method=centroid needs no quotes. */
function valueOf(text: string): unknown {
  try {
    return JSON.parse(text)
  }
  catch {
    return text
  }
}

function whole(text: string, name: string, least: number, most: number): number {
  const value = number(text)
  if (!Number.isInteger(value) || value < least || value > most) throw new InputError(`${name} must be a whole number from ${least} to ${most}.`)
  return value
}
