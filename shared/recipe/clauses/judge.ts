import { scoreMeasures, type Recipe } from '../../schemas/recipe'
import { choice, text, type Chosen, type Piece } from './pieces'

const measureLabels = { laplacian: 'Laplacian variance', peak: 'peak intensity', transfer: 'transfer of detail' } as const

/** How frames are prepared and scored. */
export function judgeClause({ prepare, score }: Recipe, chosen: Chosen): Piece[] {
  const blurText = score.blurPx === null
    ? (chosen.blurPx === undefined ? 'a fitting width' : `${chosen.blurPx.toFixed(1)} px`)
    : `${score.blurPx.toFixed(1)} px`
  const measure = score.rankBy ?? chosen.rankBy
  const measureText = measure === undefined ? 'most fitting measure' : measureLabels[measure]
  return [
    choice('prepare.repairHotPixels', 'Hot pixels', prepare.repairHotPixels, [
      { value: true, label: 'Repair hot pixels' }, { value: false, label: 'Leave hot pixels' }]),
    text(' and score each frame by its '),
    choice('score.rankBy', 'Score', score.rankBy, [
      { value: null, label: 'let Lull choose' }, ...scoreMeasures.map(value => ({ value, label: measureLabels[value] }))], measureText),
    text(' after a blur of '),
    { kind: 'value', path: 'score.blurPx', name: 'Blur before scoring', value: score.blurPx, text: blurText,
      control: { kind: 'number', min: 0, max: 8, step: 0.1, unit: 'px', scale: 1, nullLabel: 'let Lull choose' } },
    text('. '),
  ]
}
