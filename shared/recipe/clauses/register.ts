import { registerMethods, windowSizes, type Recipe } from '../../schemas/recipe'
import { choice, percent, text, type Chosen, type Piece } from './pieces'

const methodLabels = { correlation: 'cross-correlation', speckle: 'brightest speckle', centroid: 'centroid' } as const
const roundLabels = ['not refined', 'refined once', 'refined twice', 'refined three times'] as const

/** How frames are laid on each other. */
export function registerClause({ register }: Recipe, chosen: Chosen): Piece[] {
  const windowText = register.windowPx === null
    ? (chosen.windowPx === undefined ? 'a fitting size' : `${chosen.windowPx} px`)
    : `${register.windowPx} px`
  return [
    text('Register in a window of '),
    choice('register.windowPx', 'Registration window', register.windowPx, [
      { value: null, label: 'let Lull choose' }, ...windowSizes.map(value => ({ value, label: `${value} px` }))], windowText),
    text(' by '),
    choice('register.method', 'Registration method', register.method, registerMethods.map(value => ({ value, label: methodLabels[value] }))),
    text(', against the best '),
    percent('register.referenceFraction', 'Reference fraction', register.referenceFraction),
    text(', '),
    choice('register.refineRounds', 'Refinement', register.refineRounds, roundLabels.map((label, value) => ({ value, label }))),
    text('; let parts of the field '),
    choice('register.patches', 'Field patches', register.patches, [
      { value: 'auto', label: 'follow their own air where it differs' }, { value: 'always', label: 'always follow their own air' }, { value: 'never', label: 'move as one' }]),
    text(register.patchPlaces ? ` in ${register.patchPlaces.length} patches placed by hand, and ` : ', and '),
    choice('register.alignColours', 'Colours', register.alignColours, [
      { value: true, label: 'lay the colours on each other' }, { value: false, label: 'leave the colours as they are' }]),
    text('. '),
  ]
}
