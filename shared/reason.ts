/** Why a keep fraction is a good or a bad choice, in words, from the figures of the proofs and nothing else. */
import { percentText } from './recipe/sentences'
import type { StackFigures } from './schemas/run'

export interface Reason { headline: string, text: string, tone: 'fine' | 'look' }

/** FWHM differences below this many standard errors, or sharpness ones below 3 %, are taken as none. */
const SIGMAS = 2
const SAME_SHARPNESS = 0.03

/** Whether a is clearly blunter than b. */
function blunter(a: StackFigures, b: StackFigures): boolean {
  if (a.fwhmPx !== null && b.fwhmPx !== null) {
    const error = Math.hypot(a.fwhmErrPx ?? 0, b.fwhmErrPx ?? 0)
    return a.fwhmPx - b.fwhmPx > Math.max(SIGMAS * error, 0.01 * b.fwhmPx)
  }
  return a.sharpness < b.sharpness * (1 - SAME_SHARPNESS)
}

/**
 * `proofs` are stacks at the standard fractions, any order; `now` the stack on the screen. Proofs of fewer than
 * three frames say nothing. Sharpness and noise trade monotonically, so there is no best point: the range given is
 * where keeping more frames costs no sharpness that the figures can tell.
 */
export function reasonFor(proofs: readonly StackFigures[], now: StackFigures, noSignal: boolean): Reason | null {
  if (noSignal) return { tone: 'look', headline: 'There is no signal to rank by.', text: 'What these frames hold cannot be told from noise. A stack of them would show what the alignment put there. Check the target, the focus and the exposure.' }
  const usable = proofs.filter(proof => proof.count >= 3).sort((a, b) => a.fraction - b.fraction)
  if (usable.length < 2) return null
  const sharpest = usable.reduce((best, proof) => (blunter(best, proof) ? proof : best), usable[0]!)
  const like = usable.filter(proof => !blunter(proof, sharpest) && proof.fraction >= sharpest.fraction)
  const low = sharpest
  const high = like.at(-1)!
  const noise = (a: StackFigures, b: StackFigures) => (b.noise > 0 ? a.noise / b.noise : 1)
  const range = low.fraction === high.fraction ? `At ${percentText(low.fraction)}` : `From ${percentText(low.fraction)} to ${percentText(high.fraction)}`
  const inside = now.fraction >= low.fraction * 0.999 && now.fraction <= high.fraction * 1.001
  const quieter = low.fraction === high.fraction ? '' : ` ${percentText(high.fraction)} has ${noise(high, low).toFixed(2)} times the noise of ${percentText(low.fraction)}.`
  if (inside) {
    return { tone: 'fine', headline: `${range} the figures tell no loss of sharpness.`, text: `What is kept lies in that range.${quieter}` }
  }
  if (now.fraction > high.fraction) {
    return { tone: 'look', headline: `Keeping more than ${percentText(high.fraction)} blurs this stack.`, text: `${range} the figures tell no loss of sharpness.${quieter} Keep fewer frames to gain detail, or stay here for less noise.` }
  }
  return { tone: 'look', headline: `Keeping less than ${percentText(low.fraction)} adds noise and no sharpness.`, text: `At ${percentText(low.fraction)} the stack is as sharp, with ${noise(low, now).toFixed(2)} times the noise.` }
}
