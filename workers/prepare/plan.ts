/** What a capture's frames need before they are judged, found from frames spread over it. */
import type { CaptureFacts } from '../../shared/schemas/capture'
import type { Recipe } from '../../shared/schemas/recipe'
import type { Samples } from '../decode/types'
import { findFaultyPixels } from './hotpixels'
import type { PreparePlan } from './types'

/**
 * @param surveyFrames stored frames spread over the capture, each planes × height × width; 16 or more are advised,
 * with fewer than 4 no pixel can be told to be faulty
 */
export function makePlan(
  facts: Pick<CaptureFacts, 'width' | 'height' | 'planes' | 'mosaic' | 'saturation'>,
  surveyFrames: Samples[],
  recipe: Pick<Recipe, 'prepare'>,
): PreparePlan {
  const { width, height, planes, mosaic, saturation } = facts
  const faulty = recipe.prepare.repairHotPixels
    ? findFaultyPixels(surveyFrames, width, height, planes, mosaic)
    : { hotPixels: new Int32Array(0), repairFrom: new Int32Array(0) }
  return { width, height, planes, mosaic, saturation, ...faulty }
}
