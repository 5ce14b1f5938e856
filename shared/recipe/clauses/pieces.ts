/** What the recipe's paragraph is made of. */
import type { TargetKind } from '../../schemas/capture'
import type { ScoreMeasure } from '../../schemas/recipe'

export type Value = string | number | boolean | null

/** How a value is edited. Numbers are in the unit shown; `scale` turns the stored value into the shown one (0.1 → 10 %). */
export type ValueControl =
  | { kind: 'choice', options: { value: Value, label: string }[] }
  | { kind: 'number', min: number, max: number, step: number, unit: string, scale: number, nullLabel?: string }

/** `path` is the dotted path of an editable value; items of a list by their number: "restore.gains.0". */
export type Piece =
  | { kind: 'text', text: string }
  | { kind: 'value', path: string, text: string, name: string, value: Value, control: ValueControl }

/** What the survey chose where the recipe leaves the choice to Lull; shown as "1.2 px, chosen". */
export interface Chosen { rankBy?: ScoreMeasure, blurPx?: number, windowPx?: number, kind?: TargetKind }

export const text = (words: string): Piece => ({ kind: 'text', text: words })

/** 0.08 → "8 %"; 0.005 → "0.5 %". At most one decimal. */
export function percentText(fraction: number): string {
  const percent = Math.round(fraction * 1000) / 10
  return `${Number.isInteger(percent) ? percent : percent.toFixed(1)} %`
}

export function percent(path: string, name: string, value: number): Piece {
  return { kind: 'value', path, name, value, text: percentText(value), control: { kind: 'number', min: 0.1, max: 100, step: 0.1, unit: '%', scale: 100 } }
}

/** A value out of a few; `shown` replaces the label where Lull's own choice is known. */
export function choice<T extends Value>(path: string, name: string, value: T, options: readonly { value: T, label: string }[], shown?: string): Piece {
  const label = options.find(option => option.value === value)?.label ?? String(value)
  return { kind: 'value', path, name, value, text: shown ?? label, control: { kind: 'choice', options: [...options] } }
}

/** A number within bounds, shown with its unit and as many decimals as its step has. */
export function quantity(path: string, name: string, value: number, bounds: { min: number, max: number, step: number, unit: string }): Piece {
  const decimals = Math.max(0, -Math.floor(Math.log10(bounds.step) + 1e-9))
  return { kind: 'value', path, name, value, text: `${value.toFixed(decimals)} ${bounds.unit}`.trim(), control: { kind: 'number', scale: 1, ...bounds } }
}
