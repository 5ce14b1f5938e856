import type { Recipe } from '../../schemas/recipe'
import { choice, quantity, text, type Piece } from './pieces'

const scaleLabels = ['nothing', 'the finest scale', 'the 2 finest scales', 'the 3 finest scales', 'the 4 finest scales', 'the 5 finest scales'] as const

/** How detail is restored. */
export function restoreClause({ restore }: Recipe): Piece[] {
  const pieces = [
    text('Restore '),
    choice('restore.scales', 'Restored scales', restore.scales, scaleLabels.map((label, value) => ({ value, label }))),
  ]
  if (restore.scales > 0) {
    pieces.push(
      text(' with a gain of '),
      quantity('restore.gain', 'Restoration gain', restore.gain, { min: 1, max: 6, step: 0.1, unit: '×' }),
      text(' where the signal stands '),
      { kind: 'value', path: 'restore.thresholdSigma', name: 'Noise threshold', value: restore.thresholdSigma, text: `${restore.thresholdSigma.toFixed(1)} σ`,
        control: { kind: 'number', min: 0, max: 10, step: 0.5, unit: 'σ', scale: 1 } },
      text(' above the noise'))
  }
  return [...pieces, text('.')]
}
