import { colourShifts } from '../register/colours'
import type { Ladder } from './ladder-pass'
import type { Reference } from './messages'
import type { Stacker } from './stacker'
import type { Surveyed } from './survey-frames'

/** Share of the frames in the stack on which the colours are registered: sharp, and with little noise. */
const SHARE = 0.3

/** Finds how the colour planes lie to each other, on a stack of the better frames, and has every stack laid together by it. */
export async function layColours(stacker: Stacker, { planes, width, height }: Ladder, { score, survey }: Surveyed, reference: Reference): Promise<void> {
  if (planes !== 3 || stacker.ranked === 0) return
  stacker.colours = null
  const image = await stacker.stack(Math.ceil(SHARE * stacker.ranked))
  stacker.colours = colourShifts(image.samples, width, height, reference.x, reference.y, score.windowPx, survey.form)
}
