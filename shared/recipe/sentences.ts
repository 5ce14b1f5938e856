/**
 * A recipe as a paragraph: a list of text pieces and editable values. The bench, the archive, the
 * difference of two recipes, the review and the printed report all use this one module.
 */
import type { Recipe, ScoreMeasure } from '../schemas/recipe'
import { combineMethods, registerMethods, resampleKernels, scoreMeasures, windowSizes } from '../schemas/recipe'

/** How a value is edited. Numbers are in the unit shown; `scale` turns the stored value into the shown one (0.1 → 10 %). */
export type ValueControl =
  | { kind: 'choice', options: { value: string | number | boolean | null, label: string }[] }
  | { kind: 'number', min: number, max: number, step: number, unit: string, scale: number, nullLabel?: string }

export type Piece =
  | { kind: 'text', text: string }
  | { kind: 'value', path: RecipePath, text: string, name: string, value: string | number | boolean | null, control: ValueControl }

/** The dotted path of an editable value. */
export type RecipePath =
  | 'prepare.repairHotPixels'
  | 'score.rankBy' | 'score.blurPx'
  | 'register.windowPx' | 'register.method' | 'register.referenceFraction' | 'register.refineRounds'
  | 'keep.fraction'
  | 'combine.method' | 'combine.kernel'
  | 'restore.scales' | 'restore.gain' | 'restore.thresholdSigma'

/** What the survey chose where the recipe leaves the choice to Lull; shown as "1.2 px, chosen". */
export interface Chosen { rankBy?: ScoreMeasure, blurPx?: number, windowPx?: number }

const measureLabels = { laplacian: 'Laplacian variance', peak: 'peak intensity', transfer: 'transfer of detail' } as const
const methodLabels = { correlation: 'cross-correlation', speckle: 'brightest speckle', centroid: 'centroid' } as const
const kernelLabels = { cubic: 'cubic', bilinear: 'linear', nearest: 'whole-pixel' } as const
const roundLabels = ['not refined', 'refined once', 'refined twice', 'refined three times'] as const
const scaleLabels = ['nothing', 'the finest scale', 'the 2 finest scales', 'the 3 finest scales', 'the 4 finest scales', 'the 5 finest scales'] as const

/** 0.08 → "8 %"; 0.005 → "0.5 %". At most one decimal. */
export function percentText(fraction: number): string {
  const percent = Math.round(fraction * 1000) / 10
  return `${Number.isInteger(percent) ? percent : percent.toFixed(1)} %`
}

function percent(path: RecipePath, name: string, value: number): Piece {
  return { kind: 'value', path, name, value, text: percentText(value), control: { kind: 'number', min: 0.1, max: 100, step: 0.1, unit: '%', scale: 100 } }
}

function choice<T extends string | number | boolean | null>(path: RecipePath, name: string, value: T, options: readonly { value: T, label: string }[]): Piece {
  const label = options.find(option => option.value === value)?.label ?? String(value)
  return { kind: 'value', path, name, value, text: label, control: { kind: 'choice', options: [...options] } }
}

const text = (words: string): Piece => ({ kind: 'text', text: words })

/** The paragraph. `chosen` fills in what the survey found for values the recipe leaves open. */
export function recipePieces(recipe: Recipe, chosen: Chosen = {}): Piece[] {
  const { prepare, score, register, keep, combine, restore } = recipe
  const blurText = score.blurPx === null
    ? (chosen.blurPx === undefined ? 'a fitting width' : `${chosen.blurPx.toFixed(1)} px`)
    : `${score.blurPx.toFixed(1)} px`
  const measure = score.rankBy ?? chosen.rankBy
  const measureText = measure === undefined ? 'most fitting measure' : measureLabels[measure]
  const windowText = register.windowPx === null
    ? (chosen.windowPx === undefined ? 'a fitting size' : `${chosen.windowPx} px`)
    : `${register.windowPx} px`
  const pieces: Piece[] = [
    choice('prepare.repairHotPixels', 'Hot pixels', prepare.repairHotPixels, [
      { value: true, label: 'Repair hot pixels' }, { value: false, label: 'Leave hot pixels' }]),
    text(' and score each frame by its '),
    { ...choice('score.rankBy', 'Score', score.rankBy, [
      { value: null, label: 'let Lull choose' }, ...scoreMeasures.map(value => ({ value, label: measureLabels[value] }))]), text: measureText } as Piece,
    text(' after a blur of '),
    { kind: 'value', path: 'score.blurPx', name: 'Blur before scoring', value: score.blurPx, text: blurText,
      control: { kind: 'number', min: 0, max: 8, step: 0.1, unit: 'px', scale: 1, nullLabel: 'let Lull choose' } },
    text('. Register in a window of '),
    { ...choice('register.windowPx', 'Registration window', register.windowPx, [
      { value: null, label: 'let Lull choose' }, ...windowSizes.map(value => ({ value, label: `${value} px` }))]), text: windowText } as Piece,
    text(' by '),
    choice('register.method', 'Registration method', register.method, registerMethods.map(value => ({ value, label: methodLabels[value] }))),
    text(', against the best '),
    percent('register.referenceFraction', 'Reference fraction', register.referenceFraction),
    text(', '),
    choice('register.refineRounds', 'Refinement', register.refineRounds, roundLabels.map((label, value) => ({ value, label }))),
    text('. Keep the best '),
    percent('keep.fraction', 'Keep fraction', keep.fraction),
    text(', and combine them by their '),
    choice('combine.method', 'Combination', combine.method, combineMethods.map(value => ({ value, label: value }))),
    text(' with '),
    choice('combine.kernel', 'Resampling', combine.kernel, resampleKernels.map(value => ({ value, label: kernelLabels[value] }))),
    text(' resampling. Restore '),
    choice('restore.scales', 'Restored scales', restore.scales, scaleLabels.map((label, value) => ({ value, label }))),
  ]
  if (restore.scales > 0) {
    pieces.push(
      text(' with a gain of '),
      { kind: 'value', path: 'restore.gain', name: 'Restoration gain', value: restore.gain, text: `${restore.gain.toFixed(1)} ×`,
        control: { kind: 'number', min: 1, max: 6, step: 0.1, unit: '×', scale: 1 } },
      text(' where the signal stands '),
      { kind: 'value', path: 'restore.thresholdSigma', name: 'Noise threshold', value: restore.thresholdSigma, text: `${restore.thresholdSigma.toFixed(1)} σ`,
        control: { kind: 'number', min: 0, max: 10, step: 0.5, unit: 'σ', scale: 1 } },
      text(' above the noise'))
  }
  pieces.push(text('.'))
  return pieces
}

/** The paragraph as plain text, for FITS HISTORY, mails and screen readers. */
export function recipeText(recipe: Recipe, chosen: Chosen = {}): string {
  return recipePieces(recipe, chosen).map(piece => piece.text).join('')
}

/** Reads the value at a path. */
export function recipeValue(recipe: Recipe, path: RecipePath): string | number | boolean | null {
  const [group, field] = path.split('.') as [keyof Recipe, string]
  return (recipe[group] as unknown as Record<string, string | number | boolean | null>)[field]!
}

/** A copy of the recipe with the value at a path replaced; not validated (readRecipe does that). */
export function withRecipeValue(recipe: Recipe, path: string, value: unknown): Recipe {
  const copy = structuredClone(recipe) as unknown as Record<string, Record<string, unknown>>
  const [group, field] = path.split('.')
  if (!group || !field || typeof copy[group] !== 'object' || !(field in copy[group]!)) throw new RangeError(`A recipe has no value called "${path}".`)
  copy[group]![field] = value
  return copy as unknown as Recipe
}
