/** Recipes: saved, named, versioned, shared with the club, forked. */
import type { z } from 'zod'
import type { forkBody, recipeBody, RecipeDetail, recipePatchBody, RecipeSummary, RecipeVersion, recipeVersionBody } from '../../../shared/api/archive'
import { recipeHash } from '../../../shared/recipe/canonical'
import { readRecipe } from '../../../shared/recipe/migrate'
import type { Recipe } from '../../../shared/schemas/recipe'
import { mayWith } from '../access'
import { audit } from '../audit'
import type { Db } from '../db'
import { useDb } from '../db'
import { notFound, problem, texts } from '../errors'
import type { Actor } from '../session'
import { newId } from '../tokens'

interface VersionRow { id: string, recipe_id: string, version: number, recipe: string, recipe_hash: string, note: string, author_name: string, created_at: Date }
interface RecipeRow { id: string, club_id: string, owner_id: string, owner_name: string, name: string, description: string, shared: number, fork_of_version_id: string | null, updated_at: Date, runs: number }

const versionOf = (row: VersionRow): RecipeVersion => ({
  id: row.id, version: row.version, recipe: readRecipe(JSON.parse(row.recipe)), recipeHash: row.recipe_hash, note: row.note, createdAt: row.created_at.toISOString(), author: row.author_name,
})

const versionsQuery = (db: Db) => db('recipe_versions as v').join('users as a', 'a.id', 'v.author_id').select('v.*', 'a.name as author_name')

function readable(db: Db, actor: Actor) {
  return db('recipes as q').join('users as u', 'u.id', 'q.owner_id').where('q.club_id', actor.clubId).whereNull('q.deleted_at')
    .where(either => either.where('q.owner_id', actor.id).orWhere('q.shared', true))
    .select('q.*', 'u.name as owner_name', db.raw('(select count(*) from runs r join recipe_versions w on w.id = r.recipe_version_id where w.recipe_id = q.id and r.state = \'filed\') as runs'))
}

async function originOf(db: Db, versionId: string | null) {
  if (!versionId) return null
  const row = await db('recipe_versions as v').join('recipes as q', 'q.id', 'v.recipe_id').where('v.id', versionId).first('q.id', 'q.name', 'v.version')
  return row ? { recipeId: row.id as string, name: row.name as string, version: row.version as number } : null
}

async function summaryOf(db: Db, actor: Actor, row: RecipeRow, versions: RecipeVersion[]): Promise<RecipeSummary> {
  return {
    id: row.id, name: row.name, description: row.description, owner: { id: row.owner_id, name: row.owner_name }, mine: row.owner_id === actor.id, shared: Boolean(row.shared),
    forkOf: await originOf(db, row.fork_of_version_id), latest: versions[0]!, versions: versions.length, runs: Number(row.runs), updatedAt: row.updated_at.toISOString(),
  }
}

export async function listRecipes(actor: Actor): Promise<RecipeSummary[]> {
  const db = useDb()
  const rows = await readable(db, actor).orderBy([{ column: 'q.updated_at', order: 'desc' }, { column: 'q.id' }]).limit(1000) as RecipeRow[]
  if (rows.length === 0) return []
  const versions = await versionsQuery(db).whereIn('v.recipe_id', rows.map(row => row.id)).orderBy('v.version', 'desc') as VersionRow[]
  const byRecipe = groupByRecipe(versions)
  return Promise.all(rows.map(row => summaryOf(db, actor, row, byRecipe.get(row.id)!.map(versionOf))))
}

function groupByRecipe(versions: VersionRow[]): Map<string, VersionRow[]> {
  const groups = new Map<string, VersionRow[]>()
  for (const version of versions) groups.set(version.recipe_id, [...groups.get(version.recipe_id) ?? [], version])
  return groups
}

export async function readRecipeDetail(actor: Actor, id: string): Promise<RecipeDetail> {
  const db = useDb()
  const row = await readable(db, actor).where('q.id', id).first() as RecipeRow | undefined
  if (!row) throw notFound()
  const history = (await versionsQuery(db).where('v.recipe_id', id).orderBy('v.version', 'desc') as VersionRow[]).map(versionOf)
  const forks = await readable(db, actor).whereIn('q.fork_of_version_id', history.map(version => version.id)) as RecipeRow[]
  return { ...await summaryOf(db, actor, row, history), history, forks: forks.map(fork => ({ id: fork.id, name: fork.name, owner: fork.owner_name })) }
}

async function insertRecipe(db: Db, actor: Actor, { name, description, shared, recipe, note, forkOf }: { name: string, description: string, shared: boolean, recipe: Recipe, note: string, forkOf: string | null }): Promise<string> {
  const id = newId()
  const now = new Date()
  await db('recipes').insert({ id, club_id: actor.clubId, owner_id: actor.id, name, description, shared, fork_of_version_id: forkOf, created_at: now, updated_at: now })
  await insertVersion(db, actor, id, 1, recipe, note)
  return id
}

async function insertVersion(db: Db, actor: Actor, recipeId: string, version: number, recipe: Recipe, note: string): Promise<void> {
  await db('recipe_versions').insert({ id: newId(), recipe_id: recipeId, version, recipe: JSON.stringify(recipe), recipe_hash: await recipeHash(recipe), note, author_id: actor.id, created_at: new Date() })
}

export async function createRecipe(actor: Actor, { name, description, shared, recipe }: z.output<typeof recipeBody>): Promise<RecipeDetail> {
  const id = await useDb().transaction(async (trx) => {
    const made = await insertRecipe(trx, actor, { name, description, shared, recipe, note: '', forkOf: null })
    await audit(trx, { clubId: actor.clubId, userId: actor.id, actor: actor.name, action: 'saved a recipe', kind: 'recipe', id: made, detail: name })
    return made
  })
  return readRecipeDetail(actor, id)
}

/** Locks the recipe for a change by its owner. A shared one of somebody else may be read, so that answers 403. */
async function ownRecipe(trx: Db, actor: Actor, id: string) {
  const row = await trx('recipes').where({ id, club_id: actor.clubId }).whereNull('deleted_at').forUpdate().first()
  if (!row || (row.owner_id !== actor.id && !row.shared)) throw notFound()
  if (!mayWith(actor, 'recipe.write', { ownerId: row.owner_id, clubId: row.club_id })) throw problem(403, 'not-allowed', texts.notAllowed)
  return row
}

export async function changeRecipe(actor: Actor, id: string, { name, description, shared }: z.output<typeof recipePatchBody>): Promise<RecipeDetail> {
  await useDb().transaction(async (trx) => {
    await ownRecipe(trx, actor, id)
    await trx('recipes').where({ id }).update({ ...(name === undefined ? {} : { name }), ...(description === undefined ? {} : { description }), ...(shared === undefined ? {} : { shared }), updated_at: new Date() })
    await audit(trx, { clubId: actor.clubId, userId: actor.id, actor: actor.name, action: 'changed a recipe', kind: 'recipe', id, detail: shared === undefined ? '' : shared ? 'shared with the club' : 'no longer shared' })
  })
  return readRecipeDetail(actor, id)
}

/** Takes a recipe out of the lists. Runs made with it keep their own copy and their version's name. */
export async function deleteRecipe(actor: Actor, id: string): Promise<void> {
  await useDb().transaction(async (trx) => {
    await ownRecipe(trx, actor, id)
    await trx('recipes').where({ id }).update({ deleted_at: new Date() })
    await audit(trx, { clubId: actor.clubId, userId: actor.id, actor: actor.name, action: 'deleted a recipe', kind: 'recipe', id })
  })
}

export async function addVersion(actor: Actor, id: string, { recipe, note }: z.output<typeof recipeVersionBody>): Promise<RecipeDetail> {
  await useDb().transaction(async (trx) => {
    await ownRecipe(trx, actor, id)
    const latest = await trx('recipe_versions').where({ recipe_id: id }).orderBy('version', 'desc').first()
    if (latest.recipe_hash === await recipeHash(recipe)) throw problem(409, 'no-change', `Version ${latest.version} holds exactly these values already.`)
    await insertVersion(trx, actor, id, latest.version + 1, recipe, note)
    await trx('recipes').where({ id }).update({ updated_at: new Date() })
    await audit(trx, { clubId: actor.clubId, userId: actor.id, actor: actor.name, action: 'saved a version', kind: 'recipe', id, detail: `version ${latest.version + 1}` })
  })
  return readRecipeDetail(actor, id)
}

export async function forkRecipe(actor: Actor, id: string, { name, versionId }: z.output<typeof forkBody>): Promise<RecipeDetail> {
  const origin = await readRecipeDetail(actor, id)
  const version = versionId ? origin.history.find(item => item.id === versionId) : origin.latest
  if (!version) throw notFound()
  const made = await useDb().transaction(async (trx) => {
    const fork = await insertRecipe(trx, actor, { name: name ?? `${origin.name}, fork`.slice(0, 120), description: '', shared: false, recipe: version.recipe, note: `Forked from ${origin.name}, version ${version.version}.`, forkOf: version.id })
    await audit(trx, { clubId: actor.clubId, userId: actor.id, actor: actor.name, action: 'forked a recipe', kind: 'recipe', id: fork, detail: `from ${origin.name}, version ${version.version}` })
    return fork
  })
  return readRecipeDetail(actor, made)
}
