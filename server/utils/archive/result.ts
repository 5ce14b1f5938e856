import { readRecipe } from '../../../shared/recipe/migrate'
import type { RunResult } from '../../../shared/schemas/run'

/**
 * What a run stated when it was announced, with its recipe brought to today's version. `recipeHash` stays the hash
 * of the recipe as it was filed.
 */
export function storedResult(text: string): RunResult {
  const result = JSON.parse(text) as RunResult
  return { ...result, recipe: readRecipe(result.recipe) }
}
