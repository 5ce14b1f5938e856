/** Instruments, targets and recipes of the demo, made where they are missing. */
import type { Instrument, RecipeDetail, RecipeSummary, RecipeVersion, Target } from '../../shared/api/archive'
import { recipeHash } from '../../shared/recipe/canonical'
import type { Member } from './member'
import { instruments, recipes, targets, type InstrumentKey, type Person, type RecipeKey } from './scenario'

export type Members = Record<Person, Member>

export async function ensureInstruments(members: Members): Promise<Record<InstrumentKey, string>> {
  const ids = {} as Record<InstrumentKey, string>
  for (const key of Object.keys(instruments) as InstrumentKey[]) {
    const { owner, body } = instruments[key]
    const there = (await members[owner].call<Instrument[]>('GET', '/api/instruments')).find(item => item.name === body.name)
    ids[key] = (there ?? await members[owner].call<Instrument>('POST', '/api/instruments', body)).id
  }
  return ids
}

export async function ensureTargets(members: Members): Promise<void> {
  const there = await members.orla.call<Target[]>('GET', '/api/targets')
  for (const target of targets) if (!there.some(({ name }) => name === target.name)) await members.orla.call('POST', '/api/targets', target)
}

/** Versions of each recipe, first to last. */
export async function ensureRecipes(members: Members): Promise<Record<RecipeKey, RecipeVersion[]>> {
  const found = {} as Record<RecipeKey, RecipeVersion[]>
  for (const key of Object.keys(recipes) as RecipeKey[]) {
    const plan = recipes[key]
    const owner = members[plan.owner]
    const there = (await owner.call<RecipeSummary[]>('GET', '/api/recipes')).find(item => item.mine && item.name === plan.name)
    let recipe = there ? await owner.call<RecipeDetail>('GET', `/api/recipes/${there.id}`) : await made(owner, key, found)
    if (recipe.description !== plan.description || recipe.shared !== plan.shared) {
      recipe = await owner.call<RecipeDetail>('PATCH', `/api/recipes/${recipe.id}`, { description: plan.description, shared: plan.shared })
    }
    const versions: RecipeVersion[] = []
    for (const version of plan.versions) {
      const hash = await recipeHash(version.recipe)
      if (!recipe.history.some(({ recipeHash: other }) => other === hash)) recipe = await owner.call<RecipeDetail>('POST', `/api/recipes/${recipe.id}/versions`, version)
      versions.push(recipe.history.find(({ recipeHash: other }) => other === hash)!)
    }
    found[key] = versions
  }
  return found
}

async function made(owner: Member, key: RecipeKey, found: Partial<Record<RecipeKey, RecipeVersion[]>>): Promise<RecipeDetail> {
  const { name, description, shared, versions, forkOf } = recipes[key]
  if (forkOf === null) return owner.call<RecipeDetail>('POST', '/api/recipes', { name, description, shared, recipe: versions[0]!.recipe })
  const readable = await owner.call<RecipeSummary[]>('GET', '/api/recipes')
  const origin = readable.find(item => item.name === recipes[forkOf].name)!
  return owner.call<RecipeDetail>('POST', `/api/recipes/${origin.id}/fork`, { name, versionId: found[forkOf]!.at(-1)!.id })
}
