/** A value and its error with as many decimals as the error bears: one figure of it, two where it begins with 1. */
export function withError(value: number, error: number, unit: string): { value: string, error: string } {
  const order = error > 0 ? Math.floor(Math.log10(error)) : -3
  const leading = error > 0 ? error / 10 ** order : 1
  const decimals = Math.max(0, Math.min(4, (leading < 1.95 ? 1 : 0) - order))
  return { value: `${value.toFixed(decimals).replace('-', '−')}${unit}`, error: `± ${error.toFixed(decimals)}` }
}
