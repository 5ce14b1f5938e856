/** The steps of the seeding, in order; each asks the server first what is there already. */
import type { Club } from '../../shared/api/account'
import { nightOf } from './dates'
import { fileRun, findFiled, type RunIdentity } from './filing'
import { ensureInstruments, ensureRecipes, ensureTargets, type Members } from './library'
import { Member } from './member'
import { createProgress } from './progress'
import { ensureLink, ensureReview, reviewPlans } from './reviews'
import { captures, instruments, people, recipes, runs, type CaptureKey, type RunPlan } from './scenario'
import { openRehearsal, workThrough, type OpenedCapture, type WorkedRun } from './work'

export interface SeedOptions {
  /** Share of the captures' frames that is simulated; 1 is the demo, tests take less. */
  share?: number
}

const LINKED_RUN = 'first-triple'

export async function seed(base: string, { share = 1 }: SeedOptions = {}): Promise<void> {
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
    const capture = await openRehearsal({ ...spec, start, frames: Math.max(40, Math.round(share * spec.frames)) }, file, people[observer].name, instruments[instrument].body.name)
    opened.set(key, capture)
    return capture
  }
  const work = async (plan: RunPlan): Promise<WorkedRun> => workThrough(await open(plan.capture), recipes[plan.recipe].versions[plan.version - 1]!.recipe,
    { target: plan.target, observer: people[captures[plan.capture].observer].name, recipe: recipes[plan.recipe].name })

  for (const [index, plan] of runs.entries()) {
    const owner = members[plan.owner]
    const capture = captures[plan.capture]
    const { id: recipeVersionId, version } = versions[plan.recipe][plan.version - 1]!
    const identity: RunIdentity = { target: plan.target, night: nightOf(anchor, capture.nightsAgo), recipeName: recipes[plan.recipe].name, version, recipeVersionId }
    progress.step(`run ${index + 1} of ${runs.length}, ${plan.target}`)
    let worked: WorkedRun | null = null
    let run = await findFiled(owner, identity)
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
  return club.members.find(({ name }) => name === people.orla.name)?.joinedAt ?? new Date().toISOString()
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
