/** Pins, remarks, proposals and reviews of a run, as they are answered; and writing the first three. */
import type { z } from 'zod'
import type { Pin, pinBody, Proposal, proposalBody, Remark, remarkBody, Review } from '../../../shared/api/archive'
import { recipeHash } from '../../../shared/recipe/canonical'
import { changedValues } from '../../../shared/recipe/diff'
import { readRecipe } from '../../../shared/recipe/migrate'
import { runFor } from '../archive/change'
import { storedResult } from '../archive/result'
import { audit } from '../audit'
import type { Db } from '../db'
import { useDb } from '../db'
import { notFound, problem } from '../errors'
import { deliverMails, publicUrl, queueMail } from '../mail'
import type { Actor } from '../session'
import { newId } from '../tokens'

interface Authored { id: string, author_name: string | null, guest_name: string | null, at: Date, text: string }

const authorOf = (row: Authored) => ({ author: row.guest_name ?? row.author_name ?? 'somebody', guest: row.guest_name !== null })
const pinOf = (row: Authored & { number: number, x: number, y: number }): Pin => ({ id: row.id, number: row.number, x: row.x, y: row.y, ...authorOf(row), at: row.at.toISOString(), text: row.text })
const remarkOf = (row: Authored & { pin_id: string | null }): Remark => ({ id: row.id, pinId: row.pin_id, ...authorOf(row), at: row.at.toISOString(), text: row.text })
const proposalOf = (row: Authored & { recipe: string }): Proposal => ({ id: row.id, author: authorOf(row).author, at: row.at.toISOString(), text: row.text, recipe: readRecipe(JSON.parse(row.recipe)) })

export interface ReviewRow { id: string, asked_by_name: string, asked_at: Date, text: string, verdict: Review['verdict'], verdict_by_name: string | null, verdict_at: Date | null, verdict_text: string }
export const reviewOf = (row: ReviewRow): Review => ({
  id: row.id, askedBy: row.asked_by_name, askedAt: row.asked_at.toISOString(), text: row.text, verdict: row.verdict,
  verdictBy: row.verdict_by_name, verdictAt: row.verdict_at?.toISOString() ?? null, verdictText: row.verdict_text,
})
export const reviewsQuery = (db: Db) => db('reviews as w').join('users as a', 'a.id', 'w.asked_by').leftJoin('users as b', 'b.id', 'w.verdict_by')
export const reviewColumns = ['w.*', 'a.name as asked_by_name', 'b.name as verdict_by_name']

const authored = (db: Db, table: string, runId: string) => db(`${table} as x`).leftJoin('users as u', 'u.id', 'x.author_id').where('x.run_id', runId).select('x.*', 'u.name as author_name')

export async function discussionOf(runId: string): Promise<{ pins: Pin[], remarks: Remark[], proposals: Proposal[], reviews: Review[] }> {
  const db = useDb()
  return {
    pins: (await authored(db, 'pins', runId).orderBy('x.number')).map(pinOf),
    remarks: (await authored(db, 'remarks', runId).orderBy([{ column: 'x.at' }, { column: 'x.id' }])).map(remarkOf),
    proposals: (await authored(db, 'proposals', runId).orderBy([{ column: 'x.at' }, { column: 'x.id' }])).map(proposalOf),
    reviews: (await reviewsQuery(db).where('w.run_id', runId).orderBy('w.asked_at').select(reviewColumns) as ReviewRow[]).map(reviewOf),
  }
}

/** Who writes: a member, or a guest of a link under the name they gave. */
export interface Author { userId: string | null, guestName: string | null, shownName: string, clubId: string }

export const memberAuthor = (actor: Actor): Author => ({ userId: actor.id, guestName: null, shownName: actor.name, clubId: actor.clubId })

export async function addPin(author: Author, runId: string, { x, y, text }: z.output<typeof pinBody>): Promise<Pin> {
  return useDb().transaction(async (trx) => {
    // The run's row is the lock that numbers pins one after another.
    const run = await trx('runs').where({ id: runId, state: 'filed' }).forUpdate().first('result')
    if (!run) throw notFound()
    const { width, height } = storedResult(run.result).ladder
    if (x > width - 0.5 || y > height - 0.5) throw problem(400, 'outside', 'This place is outside of the image.', { field: 'x' })
    const { top } = await trx('pins').where({ run_id: runId }).max({ top: 'number' }).first() as { top: number | null }
    const row = { id: newId(), run_id: runId, author_id: author.userId, guest_name: author.guestName, at: new Date(), text, number: (top ?? 0) + 1, x, y }
    await trx('pins').insert(row)
    await audit(trx, { clubId: author.clubId, userId: author.userId, actor: author.shownName, action: 'pinned a remark', kind: 'run', id: runId, detail: `pin ${row.number}` })
    return pinOf({ ...row, author_name: author.shownName })
  })
}

export async function addRemark(author: Author, runId: string, { pinId, text }: z.output<typeof remarkBody>): Promise<Remark> {
  return useDb().transaction(async (trx) => {
    if (!await trx('runs').where({ id: runId, state: 'filed' }).first('id')) throw notFound()
    if (pinId && !await trx('pins').where({ id: pinId, run_id: runId }).first('id')) throw notFound()
    const row = { id: newId(), run_id: runId, author_id: author.userId, guest_name: author.guestName, at: new Date(), text, pin_id: pinId }
    await trx('remarks').insert(row)
    await audit(trx, { clubId: author.clubId, userId: author.userId, actor: author.shownName, action: 'remarked', kind: 'run', id: runId })
    return remarkOf({ ...row, author_name: author.shownName })
  })
}

export async function propose(actor: Actor, runId: string, { recipe, text }: z.output<typeof proposalBody>): Promise<Proposal> {
  const run = await runFor(actor, runId, 'run.propose')
  if (run.state !== 'filed') throw notFound()
  const before = storedResult(run.result).recipe
  if (await recipeHash(recipe) === await recipeHash(before)) throw problem(400, 'no-change', 'The proposal is the recipe as it is: change a value first.')
  const row = { id: newId(), run_id: runId, author_id: actor.id, guest_name: null, at: new Date(), text, recipe: JSON.stringify(recipe) }
  await useDb().transaction(async (trx) => {
    await trx('proposals').insert(row)
    await audit(trx, { clubId: actor.clubId, userId: actor.id, actor: actor.name, action: 'proposed a change', kind: 'run', id: runId, detail: changedValues(before, recipe).join(', ') })
    const owner = await trx('users').where({ id: run.owner_id }).first('name', 'email')
    await queueMail(trx, {
      clubId: actor.clubId, to: owner.email, subject: `${actor.name} proposes a change to your run of ${run.target_name}`,
      text: `Hello ${owner.name},\n\n${actor.name} proposes another recipe for your run of ${run.target_name}.\n${text ? `\n${text}\n` : ''}\nSee it as tracked changes:\n\n${publicUrl()}/runs/${runId}/review\n`,
    })
  })
  void deliverMails()
  return proposalOf({ ...row, author_name: actor.name })
}
