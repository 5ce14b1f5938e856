/** Reviews of the demo: one accepted, one that asked for another pass, two open, of which one has pins and a proposal. */
import type { Pin, RunDetail, ShareLink } from '../../shared/api/archive'
import type { Recipe } from '../../shared/schemas/recipe'
import type { Members } from './library'
import type { Member } from './member'
import type { Person } from './scenario'

interface Talk { by: Person, text: string, /** Index of the pin it answers. */ pin?: number }
interface ReviewPlan {
  ask: string
  /** Pins by the mentor, at one of the run's places plus an offset, px. */
  pins: { place: number, dx: number, dy: number, text: string }[]
  remarks: Talk[]
  proposal: { text: string, change: (recipe: Recipe) => Recipe } | null
  verdict: { verdict: 'accepted' | 'another-pass', text: string } | null
}

export const reviewPlans: Record<string, ReviewPlan> = {
  'first-double': {
    ask: 'Is the companion clean enough for a measure?',
    pins: [{ place: 1, dx: 0, dy: 0, text: 'Round, and clear of the first ring. I would measure this.' }],
    remarks: [{ by: 'ines', pin: 0, text: 'Thank you. I will add a drift on the next night for the scale.' }],
    proposal: null,
    verdict: { verdict: 'accepted', text: 'A tenth of the frames is right here: fewer only add noise.' },
  },
  'first-planet': {
    ask: 'My first colour capture. What should I change?',
    pins: [{ place: 0, dx: 14, dy: -25, text: 'The oval is there, but washed out: half of the frames is too many for this air.' }],
    remarks: [{ by: 'ines', pin: 0, text: 'I kept more because the single frames look so noisy.' }, { by: 'matthis', pin: 0, text: 'A fifth still has some fifty frames. Try it, and restore with the gains that the capture itself tells.' }],
    proposal: { text: 'A fifth of the frames, restored with measured gains.', change: recipe => ({ ...recipe, keep: { fraction: 0.2 }, restore: { ...recipe.restore, method: 'wavelets' } }) },
    verdict: { verdict: 'another-pass', text: 'Good capture. One more pass with fewer frames, please.' },
  },
  'second-planet': {
    ask: 'The second pass, as you asked: a fifth of the frames, restored with measured gains.',
    pins: [], remarks: [], proposal: null, verdict: null,
  },
  'first-triple': {
    ask: 'I believe there is a third star between the two. Do you see it?',
    pins: [
      { place: 2, dx: 0, dy: 0, text: 'Here, between the two rings. At 30 % it is half drowned in the halo.' },
      { place: 0, dx: 7, dy: -7, text: 'The ring of A is even all round: focus and collimation are fine.' },
    ],
    remarks: [{ by: 'jorin', pin: 0, text: 'So it is real? I feared that it was a speckle that came back.' }],
    proposal: { text: 'Keep a tenth. The third star stands out, and a hundred frames still suffice.', change: recipe => ({ ...recipe, keep: { fraction: 0.1 } }) },
    verdict: null,
  },
}

/** Does whatever of the plan the run does not have yet. `places`: on the stack, px. */
export async function ensureReview(members: Members, owner: Member, runId: string, plan: ReviewPlan, places: () => Promise<{ x: number, y: number }[]>): Promise<void> {
  const mentor = members.matthis
  const path = `/api/runs/${runId}`
  const before = await owner.call<RunDetail>('GET', path)
  if (before.reviews.some(review => review.verdict !== null)) return
  if (before.reviews.length === 0) await owner.call('POST', `${path}/review`, { text: plan.ask })
  const pins: Pin[] = []
  for (const { place, dx, dy, text } of plan.pins) {
    const there = before.pins.find(pin => pin.text === text)
    const spot = there ? null : (await places())[place]!
    pins.push(there ?? await mentor.call<Pin>('POST', `${path}/pins`, { x: Math.round((spot!.x + dx) * 10) / 10, y: Math.round((spot!.y + dy) * 10) / 10, text }))
  }
  for (const { by, text, pin } of plan.remarks) {
    if (!before.remarks.some(remark => remark.text === text)) await members[by].call('POST', `${path}/remarks`, { pinId: pin === undefined ? null : pins[pin]!.id, text })
  }
  if (plan.proposal && !before.proposals.some(({ text }) => text === plan.proposal!.text)) {
    await mentor.call('POST', `${path}/proposals`, { recipe: plan.proposal.change(before.result.recipe), text: plan.proposal.text })
  }
  if (plan.verdict) await mentor.call('POST', `${path}/verdict`, plan.verdict)
}

/** A link for guests who may remark, for a month; the address itself is shown only to its maker, once. */
export async function ensureLink(owner: Member, runId: string): Promise<void> {
  const links = await owner.call<ShareLink[]>('GET', `/api/runs/${runId}/links`)
  if (links.length === 0) await owner.call('POST', `/api/runs/${runId}/links`, { scope: 'remark', days: 30 })
}
