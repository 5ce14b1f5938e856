/** Asking for a review, the mentors' queue, and the verdict. */
import type { z } from 'zod'
import type { Page, Role } from '../../../shared/api/account'
import type { askReviewBody, Review, ReviewItem, verdictBody } from '../../../shared/api/archive'
import { mayInClub } from '../access'
import { runFor } from '../archive/change'
import { runsQuery, type RunRow, summariesOf, summaryColumns } from '../archive/read'
import { audit } from '../audit'
import { useDb } from '../db'
import { notFound, problem } from '../errors'
import { deliverMails, publicUrl, queueMail } from '../mail'
import type { Actor } from '../session'
import { newId } from '../tokens'
import { reviewColumns, reviewOf, type ReviewRow, reviewsQuery } from './discussion'

const PAGE_SIZE = 25

async function reviewById(id: string): Promise<Review> {
  return reviewOf(await reviewsQuery(useDb()).where('w.id', id).first(reviewColumns) as ReviewRow)
}

export async function askReview(actor: Actor, runId: string, { text }: z.output<typeof askReviewBody>): Promise<Review> {
  const run = await runFor(actor, runId, 'run.askReview')
  if (run.state !== 'filed') throw notFound()
  const id = newId()
  await useDb().transaction(async (trx) => {
    const changed = await trx('runs').where({ id: runId, state: 'filed' }).whereNot({ review_state: 'waiting' }).update({ review_state: 'waiting' })
    if (!changed) throw problem(409, 'waiting', 'This run waits for a review already.')
    await trx('reviews').insert({ id, run_id: runId, asked_by: actor.id, asked_at: new Date(), text, verdict_text: '' })
    await audit(trx, { clubId: actor.clubId, userId: actor.id, actor: actor.name, action: 'asked for a review', kind: 'run', id: runId })
    const inRole = (role: Role) => trx('memberships as m').join('users as u', 'u.id', 'm.user_id').where({ 'm.club_id': actor.clubId, 'm.role': role, 'm.active': true }).whereNot('u.id', actor.id).select('u.name', 'u.email')
    const mentors = await inRole('mentor')
    // A club without a mentor (or whose only one asks) still has somebody who may judge.
    if (mentors.length === 0) mentors.push(...await inRole('organiser'))
    for (const mentor of mentors) {
      await queueMail(trx, {
        clubId: actor.clubId, to: mentor.email, subject: `${actor.name} asks for a review of ${run.target_name}`,
        text: `Hello ${mentor.name},\n\n${actor.name} asks for a review of a run of ${run.target_name}: the best ${run.keep_count} of ${run.frames} frames.\n${text ? `\n${text}\n` : ''}\nOpen it here; you need nothing but the browser:\n\n${publicUrl()}/runs/${runId}/review\n`,
      })
    }
  })
  void deliverMails()
  return reviewById(id)
}

export async function giveVerdict(actor: Actor, runId: string, { verdict, text }: z.output<typeof verdictBody>): Promise<Review> {
  const run = await runFor(actor, runId, 'run.judge')
  if (run.state !== 'filed') throw notFound()
  let id = ''
  await useDb().transaction(async (trx) => {
    const open = await trx('reviews').where({ run_id: runId }).whereNull('verdict').forUpdate().first('id')
    if (!open) throw problem(409, 'not-waiting', 'No review of this run is open: it was answered, or never asked for.')
    id = open.id
    await trx('reviews').where({ id }).update({ verdict, verdict_by: actor.id, verdict_at: new Date(), verdict_text: text })
    await trx('runs').where({ id: runId }).update({ review_state: verdict })
    const words = verdict === 'accepted' ? 'accepted' : 'asked for another pass'
    await audit(trx, { clubId: actor.clubId, userId: actor.id, actor: actor.name, action: words, kind: 'run', id: runId })
    const owner = await trx('users').where({ id: run.owner_id }).first('name', 'email')
    await queueMail(trx, {
      clubId: actor.clubId, to: owner.email, subject: verdict === 'accepted' ? `Your run of ${run.target_name} is accepted` : `Your run of ${run.target_name}: another pass`,
      text: `Hello ${owner.name},\n\n${actor.name} has ${words === 'accepted' ? 'accepted your run' : 'asked for another pass of your run'} of ${run.target_name}.\n${text ? `\n${text}\n` : ''}\n${publicUrl()}/runs/${runId}/review\n`,
    })
  })
  void deliverMails()
  return reviewById(id)
}

/** Mentors and organisers see the reviews of the club, members those that they asked for. */
export async function listReviews(actor: Actor, { state, page }: { state: 'waiting' | 'done', page: number }): Promise<Page<ReviewItem>> {
  const db = useDb()
  const found = () => {
    const query = reviewsQuery(db).join('runs as r', 'r.id', 'w.run_id').where({ 'r.club_id': actor.clubId, 'r.state': 'filed' })
    if (!mayInClub(actor, 'reviews.queue')) query.where('w.asked_by', actor.id)
    return state === 'waiting' ? query.whereNull('w.verdict') : query.whereNotNull('w.verdict')
  }
  const { n } = await found().count({ n: '*' }).first() as unknown as { n: number }
  // Who waits longest comes first; of those done the latest.
  const rows = await found().orderBy([state === 'waiting' ? { column: 'w.asked_at', order: 'asc' } : { column: 'w.verdict_at', order: 'desc' }, { column: 'w.id' }])
    .limit(PAGE_SIZE).offset((page - 1) * PAGE_SIZE).select(reviewColumns) as (ReviewRow & { run_id: string })[]
  const runs = rows.length ? await runsQuery(db).whereIn('r.id', rows.map(row => row.run_id)).select(summaryColumns) as RunRow[] : []
  const summaries = new Map((await summariesOf(runs)).map(run => [run.id, run]))
  return { items: rows.map(row => ({ review: reviewOf(row), run: summaries.get(row.run_id)! })), total: Number(n), page, pageSize: PAGE_SIZE }
}
