/** Figures as lines of JSON, each with what the runs scattered by. */
export function median(values: readonly number[]): number {
  const sorted = [...values].sort((a, b) => a - b)
  const n = sorted.length
  return n === 0 ? Number.NaN : 0.5 * (sorted[(n - 1) >> 1]! + sorted[n >> 1]!)
}

export function percentile(values: readonly number[], share: number): number {
  const sorted = [...values].sort((a, b) => a - b)
  return sorted[Math.min(sorted.length - 1, Math.max(0, Math.ceil(share * sorted.length) - 1))] ?? Number.NaN
}

/** Half the range of the middle half over the median: how far a repeat may be expected to differ, as a share. */
export function noise(values: readonly number[]): number {
  return (percentile(values, 0.75) - percentile(values, 0.25)) / 2 / median(values)
}

const round = (value: number) => Number(value.toPrecision(4))

export function say(line: Record<string, unknown>): void {
  const neat = Object.fromEntries(Object.entries(line).map(([name, value]) => [name, typeof value === 'number' ? round(value) : value]))
  process.stdout.write(`${JSON.stringify(neat)}\n`)
}
