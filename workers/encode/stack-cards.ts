/** The header of a stack: what was observed, how long, with what, and the recipe behind it. */
import type { CaptureFacts } from '../../shared/schemas/capture'
import { recipeText, type Chosen } from '../../shared/recipe/sentences'
import type { Recipe } from '../../shared/schemas/recipe'
import type { FitsCard } from './fits'
import { textCards } from './fits'

export interface StackContext {
  facts: CaptureFacts
  recipe: Recipe
  recipeHash: string
  recipeName: string | null
  chosen: Chosen
  targetName: string
  observer: string
  lullVersion: string
  /** Frames in the stack and the fraction they are of the ranked ones; null for the unregistered average of all. */
  kept: { count: number, fraction: number } | null
  /** Seconds since the capture's start of the first and the last frame in the stack, and their mean; null where unknown. */
  seconds: { first: number, last: number, mean: number } | null
}

const MJD_1970 = 40587

/** Cards of FITS 4.0 (sections 4.4 and 9) and those customary for amateur instruments. */
export function stackCards(context: StackContext): FitsCard[] {
  const { facts, kept, seconds } = context
  const cards: FitsCard[] = []
  const add = (key: string, value: string | number | null | undefined, comment?: string) => {
    if (value !== null && value !== undefined && value !== '') cards.push({ key, value, comment })
  }
  add('OBJECT', context.targetName || facts.object)
  add('OBSERVER', context.observer || facts.observer)
  add('TELESCOP', facts.telescope)
  add('INSTRUME', facts.instrument)
  add('FILTER', facts.filter)
  const count = kept?.count ?? facts.frameCount
  const start = facts.times.start === null ? null : Date.parse(facts.times.start)
  if (start !== null && Number.isFinite(start)) {
    const exposureS = (facts.exposureMs ?? 0) / 1000
    const iso = (s: number) => new Date(start + s * 1000).toISOString().slice(0, -1)
    add('TIMESYS', 'UTC')
    if (seconds) {
      add('DATE-OBS', iso(seconds.first), 'begin of the first frame in the stack')
      add('DATE-BEG', iso(seconds.first))
      add('DATE-AVG', iso(seconds.mean + exposureS / 2), 'mean over the frames in the stack')
      add('DATE-END', iso(seconds.last + exposureS))
      add('MJD-AVG', MJD_1970 + (start + (seconds.mean + exposureS / 2) * 1000) / 86_400_000)
      add('TELAPSE', seconds.last + exposureS - seconds.first, '[s] from begin to end')
    }
    else {
      add('DATE-OBS', iso(0), 'begin of the capture')
      add('DATE-BEG', iso(0))
    }
  }
  if (facts.exposureMs !== null) {
    add('XPOSURE', count * facts.exposureMs / 1000, '[s] frames in the stack x exposure of each')
    add('EXPTIME', count * facts.exposureMs / 1000, '[s] as XPOSURE')
  }
  add('NCOMBINE', count, 'frames in the stack')
  add('APTDIA', facts.apertureMm, '[mm] aperture')
  add('FOCALLEN', facts.focalLengthMm, '[mm] focal length')
  add('XPIXSZ', facts.pixelSizeUm, '[um] pixel')
  add('YPIXSZ', facts.pixelSizeUm, '[um] pixel')
  add('ROWORDER', 'BOTTOM-UP', 'the first row is the lowest on the screen')
  add('ORIGIN', `Lull ${context.lullVersion}`)
  cards.push(
    ...textCards('HISTORY', kept ? `Stack of the best ${kept.count} of ${facts.frameCount} frames, registered.` : `Plain mean of all ${facts.frameCount} frames as recorded, not registered.`),
    ...textCards('HISTORY', `Capture ${facts.name}, fingerprint ${facts.fingerprint}`),
  )
  if (kept) {
    cards.push(
      ...(context.recipeName ? textCards('HISTORY', `Recipe: ${context.recipeName}`) : []),
      ...textCards('HISTORY', recipeText(context.recipe, context.chosen)),
      ...textCards('HISTORY', `Recipe SHA-256 ${context.recipeHash}`),
    )
  }
  return cards
}
