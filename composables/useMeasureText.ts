/** A length in pixels as it is shown: in seconds of arc where the scale is known, with as many decimals as its uncertainty bears. */
export interface MeasureText { value: string, error: string | null }

/** Decimals that show an uncertainty with one figure, two where it begins with 1; 0-4. The fallback where none is known. */
function decimalsFor(error: number | null, fallback: number): number {
  if (error === null || !(error > 0)) return fallback
  const order = Math.floor(Math.log10(error))
  const leading = error / 10 ** order
  return Math.max(0, Math.min(3, (leading < 1.95 ? 1 : 0) - order))
}

export function measureText(px: number | null, errorPx: number | null, scaleArcsecPerPx: number | null): MeasureText | null {
  if (px === null || !Number.isFinite(px)) return null
  const factor = scaleArcsecPerPx ?? 1
  const unit = scaleArcsecPerPx === null ? ' px' : '″'
  const error = errorPx === null ? null : errorPx * factor
  const decimals = decimalsFor(error, scaleArcsecPerPx === null ? 2 : 3)
  return { value: `${(px * factor).toFixed(decimals)}${unit}`, error: error === null ? null : Number(error.toFixed(decimals)) === 0 ? `± < ${(10 ** -decimals).toFixed(decimals)}` : `± ${error.toFixed(decimals)}` }
}

/** A plain figure with a sensible number of digits: 4 significant ones, with separators above 10,000. */
export function figureText(value: number | null): string {
  if (value === null || !Number.isFinite(value)) return '–'
  const size = Math.abs(value)
  if (size >= 1000) return formatCount(Math.round(value))
  if (size === 0) return '0'
  if (size < 0.001) return value.toExponential(2).replace('e-', ' × 10⁻').replace(/⁻(\d+)/, (_, digits: string) => `⁻${[...digits].map(digit => '⁰¹²³⁴⁵⁶⁷⁸⁹'[Number(digit)]).join('')}`)
  return value.toPrecision(4)
}

/**
 * Figures of one column with the same number of decimals, so that they align: three figures for the middle
 * one. Very small figures share a power of ten, which belongs into the column's head ("10⁻⁶", else "").
 */
export function columnText(values: readonly (number | null)[]): { texts: string[], power: string } {
  const sizes = values.filter((value): value is number => value !== null && Number.isFinite(value) && value !== 0).map(Math.abs).sort((a, b) => a - b)
  const middle = sizes[Math.floor(sizes.length / 2)] ?? 1
  const power = middle < 1e-3 ? 3 * Math.floor(Math.log10(middle) / 3) : 0
  const decimals = Math.max(0, 2 - Math.floor(Math.log10(middle / 10 ** power)))
  const format = new Intl.NumberFormat('en-GB', { minimumFractionDigits: decimals, maximumFractionDigits: decimals })
  const superscript = (digits: string) => [...digits].map(digit => (digit === '-' ? '⁻' : '⁰¹²³⁴⁵⁶⁷⁸⁹'[Number(digit)])).join('')
  return {
    texts: values.map(value => (value === null || !Number.isFinite(value) ? '–' : format.format(value / 10 ** power))),
    power: power === 0 ? '' : `10${superscript(String(power))}`,
  }
}
