/** Reads a recipe of any version and returns one of today's. */
import type { Recipe } from '../schemas/recipe'
import { RECIPE_VERSION, recipeSchema } from '../schemas/recipe'

type AnyRecipe = Record<string, unknown>

/**
 * What version 2 adds, with the values that do what version 1 did. Only what is missing is filled in, so that an
 * old recipe gives the same result as before.
 */
const addedInVersion2: Record<string, AnyRecipe> = {
  register: { patches: 'never', patchPlaces: null, alignColours: false },
  restore: { gainBy: 'hand', psf: 'capture', psfCore: 0.3, psfHaloPx: 16, psfReference: null, iterations: 30, stop: 'noise', snr: null },
}

/** One gain and one threshold for all restored scales, 0 scales being none, as version 1 had it. */
function oneGainForAll(recipe: AnyRecipe): AnyRecipe {
  const restore = recipe.restore
  if (!isGroup(restore) || !('gain' in restore) || 'gains' in restore) return recipe
  const { gain, scales, ...rest } = restore
  const none = scales === 0
  return { ...recipe, restore: { ...rest, method: none ? 'nothing' : 'wavelets', scales: none ? 3 : scales, gains: new Array(6).fill(gain), thresholdsSigma: new Array(6).fill(rest.thresholdSigma) } }
}

/** migrations[v] turns a recipe of version v into one of version v + 1. */
const migrations: Record<number, (recipe: AnyRecipe) => AnyRecipe> = {
  1: recipe => ({ ...withMissing(oneGainForAll(recipe), addedInVersion2), version: 2 }),
}

function isGroup(value: unknown): value is AnyRecipe {
  return typeof value === 'object' && value !== null && !Array.isArray(value)
}

/** A copy with the fields of `additions` that it lacks, group by group. */
function withMissing(recipe: AnyRecipe, additions: AnyRecipe): AnyRecipe {
  const copy: AnyRecipe = { ...recipe }
  for (const [name, value] of Object.entries(additions)) {
    const own = copy[name]
    if (own === undefined) copy[name] = structuredClone(value)
    else if (isGroup(own) && isGroup(value)) copy[name] = withMissing(own, value)
  }
  return copy
}

/** Thrown for something that is not a recipe; the message is for the user. */
export class RecipeError extends Error {
  override name = 'RecipeError'
}

/** Parses unknown data as a recipe, migrating older versions. Throws RecipeError with a plain message. */
export function readRecipe(data: unknown): Recipe {
  if (typeof data !== 'object' || data === null || Array.isArray(data)) throw new RecipeError('This is not a recipe: a JSON object is expected.')
  let recipe = data as AnyRecipe
  const version = recipe.version
  if (typeof version !== 'number' || !Number.isInteger(version) || version < 1) throw new RecipeError('This is not a recipe: it has no version number.')
  if (version > RECIPE_VERSION) throw new RecipeError(`This recipe has version ${version}; this Lull reads versions up to ${RECIPE_VERSION}. Update Lull to use it.`)
  for (let from = version; from < RECIPE_VERSION; from++) {
    const step = migrations[from]
    if (!step) throw new RecipeError(`No way is known from recipe version ${from} to ${from + 1}.`)
    recipe = step(recipe)
  }
  const parsed = recipeSchema.safeParse(recipe)
  if (!parsed.success) {
    const issue = parsed.error.issues[0]!
    throw new RecipeError(`The recipe cannot be used: ${issue.path.join('.') || 'it'}: ${issue.message}.`)
  }
  return parsed.data
}
