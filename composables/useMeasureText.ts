/** A length in pixels as it is shown: in seconds of arc where the scale is known, with as many decimals as its uncertainty bears. */
export interface MeasureText { value: string, error: string | null }

/** Decimals that show an uncertainty with two figures at most, 0-4; 3 for arcseconds and 2 for pixels where none is known. */
function decimalsFor(error: number | null, fallback: number): number {
  if (error === null || !(error > 0)) return fallback
  return Math.max(0, Math.min(4, 1 - Math.floor(Math.log10(error))))
}

export function measureText(px: number | null, errorPx: number | null, scaleArcsecPerPx: number | null): MeasureText | null {
  if (px === null || !Number.isFinite(px)) return null
  const factor = scaleArcsecPerPx ?? 1
  const unit = scaleArcsecPerPx === null ? ' px' : '″'
  const error = errorPx === null ? null : errorPx * factor
  const decimals = decimalsFor(error, scaleArcsecPerPx === null ? 2 : 3)
  return { value: `${(px * factor).toFixed(decimals)}${unit}`, error: error === null ? null : `± ${error.toFixed(decimals)}` }
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
