import { restoringMethod, type Recipe } from '../../schemas/recipe'
import { restoreMethods, type RestoreMethod } from '../../schemas/restoration'
import { choice, quantity, text, type Chosen, type Piece } from './pieces'

type Restore = Recipe['restore']

const methodLabels: Record<RestoreMethod, string> = { 'nothing': 'nothing', 'wavelets': 'wavelet scales', 'richardson-lucy': 'Richardson-Lucy', 'wiener': 'a Wiener filter' }
const ordinals = ['finest', '2nd', '3rd', '4th', '5th', '6th'] as const

/** How detail is restored. */
export function restoreClause({ restore }: Recipe, chosen: Chosen): Piece[] {
  const method = restore.method ?? (chosen.kind ? restoringMethod(null, chosen.kind) : null)
  const shown = method === null ? 'by what fits the target' : method === 'nothing' ? 'nothing' : `by ${methodLabels[method]}`
  return [
    text('Restore '),
    choice<RestoreMethod | null>('restore.method', 'Restoration', restore.method, [
      { value: null, label: 'let Lull choose' }, ...restoreMethods.map(value => ({ value, label: methodLabels[value] }))], shown),
    ...(method === 'wavelets' ? wavelets(restore) : method === 'richardson-lucy' ? lucy(restore) : method === 'wiener' ? wiener(restore) : []),
    text('.'),
  ]
}

function wavelets(restore: Restore): Piece[] {
  const pieces = [
    text(', the '),
    choice('restore.scales', 'Restored scales', restore.scales, [1, 2, 3, 4, 5, 6].map(value => ({ value, label: value === 1 ? 'finest one' : `${value} finest` }))),
    text(', with gains '),
    choice('restore.gainBy', 'Gains', restore.gainBy, [{ value: 'transfer', label: 'from the measured transfer' }, { value: 'hand', label: 'set by hand' }]),
  ]
  if (restore.gainBy === 'hand') pieces.push(...listed(restore, 'gains', 'Gain', { min: 0, max: 10, step: 0.1, unit: '×' }), text(','))
  pieces.push(text(' where the signal stands'))
  if (restore.gainBy === 'hand') pieces.push(...listed(restore, 'thresholdsSigma', 'Noise threshold', threshold))
  else pieces.push(text(' '), quantity('restore.thresholdSigma', 'Noise threshold', restore.thresholdSigma, threshold))
  pieces.push(text(' above the noise of its scale'))
  return restore.gainBy === 'transfer' ? [...pieces, ...psf(restore, ', the blur being ')] : pieces
}

const threshold = { min: 0, max: 10, step: 0.5, unit: 'σ' }

/** One value a scale, finest first. */
function listed(restore: Restore, field: 'gains' | 'thresholdsSigma', name: string, bounds: { min: number, max: number, step: number, unit: string }): Piece[] {
  return restore[field].slice(0, restore.scales).flatMap((value, j) => [text(j === 0 ? ' ' : ', '), quantity(`restore.${field}.${j}`, `${name} of the ${ordinals[j]} scale`, value, bounds)])
}

function lucy(restore: Restore): Piece[] {
  return [
    text(', at most '),
    quantity('restore.iterations', 'Rounds', restore.iterations, { min: 1, max: 500, step: 1, unit: 'rounds' }),
    text(' and '),
    choice('restore.stop', 'End of the rounds', restore.stop, [{ value: 'noise', label: 'no longer than the noise allows' }, { value: 'count', label: 'all of them' }]),
    ...psf(restore, ', with the blur '),
  ]
}

function wiener(restore: Restore): Piece[] {
  return [
    text(' with '),
    { kind: 'value', path: 'restore.snr', name: 'Signal to noise, power', value: restore.snr, text: restore.snr === null ? 'signal and noise as measured' : `a signal to noise of ${restore.snr}`,
      control: { kind: 'number', min: 0.1, max: 1e6, step: 0.1, unit: '(power ratio)', scale: 1, nullLabel: 'measure it' } },
    ...psf(restore, ' and the blur '),
  ]
}

function psf(restore: Restore, lead: string): Piece[] {
  const reference = restore.psfReference
  const pieces: Piece[] = [
    text(lead),
    choice('restore.psf', 'Blur', restore.psf, [
      { value: 'capture', label: 'measured on this capture' },
      { value: 'analytic', label: 'a core and a halo' },
      ...(reference || restore.psf === 'reference' ? [{ value: 'reference' as const, label: `that of ${reference?.name ?? 'a reference star'}` }] : []),
    ]),
  ]
  if (restore.psf === 'analytic') {
    pieces.push(
      text(', '),
      { kind: 'value', path: 'restore.psfCore', name: 'Light in the core', value: restore.psfCore, text: `${Math.round(100 * restore.psfCore)} %`,
        control: { kind: 'number', min: 1, max: 100, step: 1, unit: '%', scale: 100 } },
      text(' of the light in the core and a halo of '),
      quantity('restore.psfHaloPx', 'Width of the halo', restore.psfHaloPx, { min: 0.5, max: 400, step: 0.5, unit: 'px' }))
  }
  return pieces
}
