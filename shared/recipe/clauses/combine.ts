import { combineMethods, resampleKernels, type Recipe } from '../../schemas/recipe'
import { choice, percent, text, type Piece } from './pieces'

const kernelLabels = { cubic6: 'six-point cubic', cubic: 'four-point cubic', bilinear: 'linear', nearest: 'whole-pixel' } as const

/** Which frames are kept and how they become one image. */
export function combineClause({ keep, combine }: Recipe): Piece[] {
  return [
    text('Keep the best '),
    percent('keep.fraction', 'Keep fraction', keep.fraction),
    text(', and combine them by their '),
    choice('combine.method', 'Combination', combine.method, combineMethods.map(value => ({ value, label: value }))),
    text(' with '),
    choice('combine.kernel', 'Resampling', combine.kernel, resampleKernels.map(value => ({ value, label: kernelLabels[value] }))),
    text(' resampling. '),
  ]
}
