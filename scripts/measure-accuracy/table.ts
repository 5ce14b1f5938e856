/** Pulls of many cases as a table. */
import type { CaseLine } from './cases'

const quantile = (sorted: readonly number[], share: number) => sorted.length === 0 ? NaN : sorted[Math.min(sorted.length - 1, Math.floor(share * sorted.length))]!

/** Median, half the distance of the 16th and the 84th percentile (1 for true errors), and the share within one error. */
export function pullFigures(pulls: readonly number[]): { count: number, median: number, width: number, within: number } {
  const sorted = [...pulls].sort((a, b) => a - b)
  const middle = sorted.length % 2 === 1 ? quantile(sorted, 0.5) : (sorted[sorted.length / 2 - 1]! + sorted[sorted.length / 2]!) / 2
  return { count: sorted.length, median: middle, width: (quantile(sorted, 0.8413) - quantile(sorted, 0.1587)) / 2, within: sorted.filter(pull => Math.abs(pull) <= 1).length / sorted.length }
}

const GROUPS: readonly [string, (line: CaseLine) => boolean][] = [
  ['all', () => true],
  ['below 1.5 λ/D', line => line.sepLd < 1.5], ['1.5-3 λ/D', line => line.sepLd >= 1.5 && line.sepLd < 3], ['above 3 λ/D', line => line.sepLd >= 3],
  ['Δm below 2', line => line.dMag < 2], ['Δm 2-4', line => line.dMag >= 2],
  ['D/r0 below 5', line => line.apertureOverR0 < 5], ['D/r0 5-8', line => line.apertureOverR0 >= 5],
]

export function pullTable(lines: readonly CaseLine[]): string {
  const count = (outcome: CaseLine['outcome']) => lines.filter(line => line.outcome === outcome).length
  const rows = [`${lines.length} cases: ${count('measured')} measured, ${count('wrong')} wrong, ${count('unresolved')} unresolved, ${count('no-signal')} without signal`,
    `${'group'.padEnd(14)} ${'of'.padEnd(10)}    n  median   width  within 1 σ`]
  for (const [name, belongs] of GROUPS) {
    const part = lines.filter(line => line.outcome === 'measured' && belongs(line))
    if (part.length === 0) continue
    for (const [label, key] of [['separation', 'sep'], ['angle', 'angle'], ['magnitude', 'mag']] as const) {
      const { count: n, median, width, within } = pullFigures(part.map(line => line[key]!.pull))
      rows.push(`${name.padEnd(14)} ${label.padEnd(10)} ${String(n).padStart(4)} ${median.toFixed(2).padStart(7)} ${width.toFixed(2).padStart(7)} ${`${Math.round(100 * within)} %`.padStart(11)}`)
    }
  }
  return rows.join('\n')
}
