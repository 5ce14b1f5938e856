/**
 * A recipe as a paragraph: a list of text pieces and editable values, one file of `clauses/` per part of the recipe.
 * The bench, the archive, the difference of two recipes, the review and the printed report all use this one module.
 */
import type { Recipe } from '../schemas/recipe'
import { combineClause } from './clauses/combine'
import { judgeClause } from './clauses/judge'
import type { Chosen, Piece, Value } from './clauses/pieces'
import { registerClause } from './clauses/register'
import { restoreClause } from './clauses/restore'

export { percentText, type Chosen, type Piece, type ValueControl } from './clauses/pieces'

/** The paragraph. `chosen` fills in what the survey found for values the recipe leaves open. */
export function recipePieces(recipe: Recipe, chosen: Chosen = {}): Piece[] {
  return [...judgeClause(recipe, chosen), ...registerClause(recipe, chosen), ...combineClause(recipe), ...restoreClause(recipe, chosen)]
}

/** The paragraph as plain text, for FITS HISTORY, mails and screen readers. */
export function recipeText(recipe: Recipe, chosen: Chosen = {}): string {
  return recipePieces(recipe, chosen).map(piece => piece.text).join('')
}

/** Reads the value at a path. */
export function recipeValue(recipe: Recipe, path: string): Value {
  return path.split('.').reduce<unknown>((at, name) => (at as Record<string, unknown>)[name], recipe) as Value
}

/** A copy of the recipe with the value at a path replaced; not validated (readRecipe does that). */
export function withRecipeValue(recipe: Recipe, path: string, value: unknown): Recipe {
  const copy = structuredClone(recipe)
  const names = path.split('.')
  const last = names.pop()!
  let at: unknown = copy
  for (const name of names) at = isHolder(at) && Object.hasOwn(at, name) ? at[name] : undefined
  if (names.length === 0 || !isHolder(at) || !Object.hasOwn(at, last)) throw new RangeError(`A recipe has no value called "${path}".`)
  at[last] = value
  return copy
}

function isHolder(value: unknown): value is Record<string, unknown> {
  return typeof value === 'object' && value !== null
}
