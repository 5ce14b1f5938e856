/** Which keep fractions a capture's evidence speaks for, and why, in words. */
import { percentText } from './recipe/clauses/pieces'
import type { Evidence, EvidencePoint } from './schemas/evidence'

/** Stacks of fewer frames have no error and say nothing. */
const FEWEST = 8
/** A range holds what loses at most so many times the least, or so many standard errors of the sharpness more: what the figures cannot tell apart. */
const SAME = 1.25
const ERRORS = 2
/** A companion counts when it stands so many standard deviations above what differs from half to half (common practice, no source). */
const SIGMAS = 5
/** Below this reliability noise decides most of the ranking. */
export const LEAST_RELIABILITY = 0.5

export interface KeepRange { from: EvidencePoint, to: EvidencePoint, best: EvidencePoint }

const sharpest = (evidence: Evidence, of: (point: EvidencePoint) => number | null, error: (point: EvidencePoint) => number | null): number =>
  evidence.points.filter(point => point.count >= FEWEST).reduce((most, point) => Math.max(most, (of(point) ?? 0) - (error(point) ?? 0)), 0)

/**
 * What a stack loses of the detail that the capture could give: by blur, the share of its sharpness missing against the sharpest
 * stack (less its error); by noise, its noise over the signal, for stars five times that. Their squares are added.
 */
export function lossOf(evidence: Evidence, point: EvidencePoint): { blur: number, noise: number, all: number } {
  const missing = (value: number | null, most: number) => (value === null || !(most > 0) ? null : Math.max(0, 1 - value / most))
  const parts = [
    missing(point.sharpness, sharpest(evidence, p => p.sharpness, p => p.sharpnessErr)),
    missing(point.finer, sharpest(evidence, p => p.finer, p => p.finerErr)),
  ].filter(part => part !== null)
  const blur = parts.reduce((sum, part) => sum + part, 0) / Math.max(1, parts.length)
  const noise = point.noise * (evidence.measure === 'transfer' ? 1 : SIGMAS)
  return { blur, noise, all: Math.sqrt(blur * blur + noise * noise) }
}

/** The run of fractions about the least loss whose loss cannot be told from it; null where nothing can be said. */
export function keepRange(evidence: Evidence): KeepRange | null {
  const points = evidence.points.filter(point => point.count >= FEWEST)
  if (!evidence.signal || points.length < 3) return null
  const losses = points.map(point => lossOf(evidence, point).all)
  const best = losses.indexOf(Math.min(...losses))
  const error = (points[best]!.sharpnessErr ?? 0) / Math.max(1e-12, points[best]!.sharpness)
  const most = Math.max(SAME * losses[best]!, losses[best]! + ERRORS * error)
  let from = best
  let to = best
  while (from > 0 && losses[from - 1]! <= most) from--
  while (to < points.length - 1 && losses[to + 1]! <= most) to++
  return { from: points[from]!, to: points[to]!, best: points[best]! }
}

export interface EvidenceWords { headline: string, text: string, tone: 'fine' | 'look' }

const percent = (share: number): string => `${(100 * share).toFixed(share < 0.0995 ? 1 : 0)} %`

/** The recommendation and its reason; `fraction` is what is kept now. */
export function evidenceWords(evidence: Evidence, fraction: number): EvidenceWords {
  if (!evidence.signal) {
    return { tone: 'look', headline: 'No signal.', text: 'What these frames hold cannot be told from noise: pixels that the alignment did not use show nothing of its reference. A stack of them would show what the alignment put there. Check the target, the focus and the exposure.' }
  }
  const range = keepRange(evidence)
  if (!range) return { tone: 'look', headline: 'Too few frames to say which fraction is best.', text: 'Stacks of eight frames and more are compared; three of them are needed.' }
  const { from, to, best } = range
  const all = evidence.points[evidence.points.length - 1]!
  const least = evidence.points.find(point => point.count >= FEWEST)!
  const star = evidence.measure !== 'transfer'
  const what = evidence.measure === 'strehl' ? 'Strehl ratio' : star ? 'share of the light in the core' : 'contrast of fine detail'
  const span = from === to ? percentText(best.fraction) : `${percentText(from.fraction)} to ${percentText(to.fraction)}`
  const parts: string[] = []
  if (from !== least) {
    const figure = star ? `what differs from half to half is ${percent(least.noise)} of the peak` : `noise is ${percent(least.noise)} of the signal in fine detail`
    parts.push(`Below, chance decides: at ${percentText(least.fraction)} ${figure}, at ${percentText(best.fraction)} ${percent(best.noise)}.`)
  }
  if (to !== all) parts.push(`Above, the air decides: all frames together lose ${percent(lossOf(evidence, all).blur)} of the ${what} of the sharpest stack, ${percentText(to.fraction)} loses ${percent(lossOf(evidence, to).blur)}.`)
  if (parts.length === 0) parts.push('All fractions lose about the same.')
  if (doubtful(evidence)) parts.push(`Noise dominates the score: two halves of the pixels rank the frames with a reliability of only ${Math.max(0, evidence.reliability!).toFixed(2)}. Blur more before scoring, or keep many frames.`)
  const inside = fraction >= from.fraction * 0.95 && fraction <= to.fraction * 1.05
  const here = inside ? `${percentText(fraction)} lies within.` : `${percentText(fraction)} is ${fraction > to.fraction ? 'more' : 'less'} than that.`
  return { tone: inside && !doubtful(evidence) ? 'fine' : 'look', headline: `Keep ${span} of this capture.`, text: [here, ...parts].join(' ') }
}

/** Noise decides most of the ranking. */
export const doubtful = ({ reliability }: Pick<Evidence, 'reliability'>): boolean => reliability !== null && reliability < LEAST_RELIABILITY
