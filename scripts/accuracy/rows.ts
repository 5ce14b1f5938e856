/** The table that is printed. */

export interface Row {
  capture: string
  what: string
  value: number
  digits: number
  /** The figure to compare with; null where there is none. */
  reference: number | null
  /** Which way is better; "none" is printed without a verdict. */
  want: 'higher' | 'lower' | 'none'
  /** Share of the reference by which a value may miss it and still reaches it; 0 unless said. */
  within?: number
  /** Where the reference comes from. */
  source: string
}

/** Says whether a row reaches its reference; rounding of the reference's last digit is granted. */
export function reaches({ value, digits, reference, want, within = 0 }: Row): boolean | null {
  if (reference === null || want === 'none') return null
  const grace = 0.5 * 10 ** -digits
  return want === 'higher' ? value >= reference * (1 - within) - grace : value <= reference * (1 + within) + grace
}

export function printRows(rows: Row[]): void {
  let last = ''
  let met = 0
  let missed = 0
  for (const row of rows) {
    if (row.capture !== last) console.log(`\n${row.capture}`)
    last = row.capture
    const verdict = reaches(row)
    if (verdict === true) met++
    if (verdict === false) missed++
    const mark = verdict === null ? '  ' : verdict ? 'ok' : '--'
    const value = Number.isFinite(row.value) ? row.value.toFixed(row.digits) : '–'
    const reference = row.reference === null ? '' : `${row.want === 'higher' ? '≥' : '≤'} ${row.reference.toFixed(row.digits)}${row.within ? ` − ${Math.round(100 * row.within)} %` : ''}`
    console.log(`  ${mark} ${row.what.padEnd(58)} ${value.padStart(9)}  ${reference.padStart(10)}  ${row.source}`)
  }
  console.log(`\n${met} reached, ${missed} not reached`)
}

export const median = (values: readonly number[]): number => {
  const sorted = [...values].sort((a, b) => a - b)
  const n = sorted.length
  return n === 0 ? NaN : 0.5 * (sorted[(n - 1) >> 1]! + sorted[n >> 1]!)
}

export const rms = (values: readonly number[]): number => Math.sqrt(values.reduce((sum, v) => sum + v * v, 0) / values.length)

/** Spearman's rank correlation; ties get their mean rank. */
export function rankCorrelation(a: readonly number[], b: readonly number[]): number {
  const ranks = (values: readonly number[]): number[] => {
    const order = values.map((_, i) => i).sort((i, j) => values[i]! - values[j]!)
    const out = new Array<number>(values.length)
    for (let from = 0; from < order.length;) {
      let to = from
      while (to + 1 < order.length && values[order[to + 1]!] === values[order[from]!]) to++
      for (let k = from; k <= to; k++) out[order[k]!] = 0.5 * (from + to)
      from = to + 1
    }
    return out
  }
  const x = ranks(a)
  const y = ranks(b)
  const mx = x.reduce((s, v) => s + v, 0) / x.length
  const my = y.reduce((s, v) => s + v, 0) / y.length
  let xy = 0
  let xx = 0
  let yy = 0
  for (let i = 0; i < x.length; i++) {
    xy += (x[i]! - mx) * (y[i]! - my)
    xx += (x[i]! - mx) ** 2
    yy += (y[i]! - my) ** 2
  }
  return xy / Math.sqrt(xx * yy)
}
