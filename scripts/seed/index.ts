/**
 * Seeds the demo into a running server: real simulation, the real core, the real API. The start command runs it each
 * time; it ends at once where the demo is complete. It can be killed at any moment, and then makes what is missing.
 *
 *   LULL_BASE_URL=http://127.0.0.1:3000 DATABASE_URL=mysql://… tsx scripts/seed/index.ts
 */
import type { Club } from '../../shared/api/account'
import { nightOf } from './dates'
import { fileRun, findRun, type RunIdentity } from './filing'
import { ensureInstruments, ensureRecipes, ensureTargets, type Members } from './library'
import { Member } from './member'
import { belongsToOthers, ensurePeople, isSeeded, markSeeded, openDatabase } from './people'
import { createProgress } from './progress'
import { ensureLink, ensureReview, reviewPlans } from './reviews'
import { captures, instruments, people, recipes, runs, type CaptureKey, type RunPlan } from './scenario'
import { openRehearsal, workThrough, type OpenedCapture, type WorkedRun } from './work'

const LINKED_RUN = 'first-triple'

export async function seed(base: string): Promise<void> {
  const progress = createProgress(2 + runs.length)
  progress.step('signing in the members')
  const members = Object.fromEntries(await Promise.all(Object.entries(people).map(async ([key, { email, password }]) => [key, await Member.signIn(base, email, password)]))) as Members
  const anchor = anchorOf(await members.orla.call<Club>('GET', '/api/club'))
  progress.step('instruments, targets and recipes')
  const instrumentIds = await ensureInstruments(members)
  await ensureTargets(members)
  const versions = await ensureRecipes(members)

  const opened = new Map<CaptureKey, OpenedCapture>()
  const filed = new Map<string, string>()
  const open = async (key: CaptureKey): Promise<OpenedCapture> => {
    const there = opened.get(key)
    if (there) return there
    const { spec, file, observer, nightsAgo, startUtc, instrument } = captures[key]
    const start = `${nightOf(anchor, nightsAgo)}T${startUtc}.000Z`
    const capture = await openRehearsal({ ...spec, start }, file, people[observer].name, instruments[instrument].body.name)
    opened.set(key, capture)
    return capture
  }
  const work = async (plan: RunPlan): Promise<WorkedRun> => workThrough(await open(plan.capture), recipes[plan.recipe].versions[plan.version - 1]!.recipe,
    { target: plan.target, observer: people[captures[plan.capture].observer].name, recipe: recipes[plan.recipe].name })

  for (const [index, plan] of runs.entries()) {
    const owner = members[plan.owner]
    const capture = captures[plan.capture]
    const identity: RunIdentity = {
      target: plan.target, night: nightOf(anchor, capture.nightsAgo), recipeName: recipes[plan.recipe].name, version: plan.version,
      recipeVersionId: versions[plan.recipe][plan.version - 1]!.id,
    }
    progress.step(`run ${index + 1} of ${runs.length}, ${plan.target}`)
    let worked: WorkedRun | null = null
    let run = await findRun(owner, identity, 'filed')
    if (!run) {
      worked = await work(plan)
      run = await fileRun(owner, identity, worked, {
        instrumentId: instrumentIds[capture.instrument], note: plan.note, replacesRunId: plan.replaces === null ? null : filed.get(plan.replaces)!,
        raw: plan.fileRaw ? { name: capture.file, bytes: (await open(plan.capture)).bytes } : null,
      })
    }
    filed.set(plan.key, run.id)
    const review = reviewPlans[plan.key]
    if (review) await ensureReview(members, owner, run.id, review, async () => (worked ??= await work(plan)).places)
    if (plan.key === LINKED_RUN) await ensureLink(owner, run.id)
    release(index, opened)
  }
  for (const capture of opened.values()) capture.engine.close()
  progress.done()
}

/** The day the demo began: when its organiser joined. */
function anchorOf(club: Club): string {
  return club.members.find(({ name }) => name === people.orla.name)!.joinedAt
}

/** Closes captures that no later run needs. */
function release(index: number, opened: Map<CaptureKey, OpenedCapture>): void {
  const later = new Set(runs.slice(index + 1).map(({ capture }) => capture))
  for (const [key, capture] of opened) {
    if (later.has(key)) continue
    capture.engine.close()
    opened.delete(key)
  }
}

async function main(): Promise<void> {
  const base = process.env.LULL_BASE_URL
  const database = process.env.DATABASE_URL ?? process.env.NUXT_DATABASE_URL
  if (!base || !database) throw new Error('LULL_BASE_URL and DATABASE_URL must say where the server and its database are.')
  const db = openDatabase(database)
  try {
    if (await isSeeded(db)) return
    if (await belongsToOthers(db)) {
      console.log('This database belongs to a club already; the demo is left out.')
      return
    }
    await ensurePeople(db)
    await seed(base)
    await markSeeded(db)
  }
  finally {
    await db.destroy()
  }
}

try {
  await main()
}
catch (reason) {
  console.error(`\nThe demo is not complete: ${(reason as Error).message}\nStart Lull again: the seeding goes on with what is missing.`)
  process.exitCode = 1
}
