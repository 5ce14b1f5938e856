/** Names of frame files in their natural order, so that frame2 comes before frame10. Deterministic: no locale. */
export function naturalCompare(a: string, b: string): number {
  const left = a.toLowerCase().match(/\d+|\D+/g) ?? []
  const right = b.toLowerCase().match(/\d+|\D+/g) ?? []
  for (let i = 0; i < Math.min(left.length, right.length); i++) {
    const x = left[i]!
    const y = right[i]!
    if (x === y) continue
    if (/^\d/.test(x) && /^\d/.test(y)) {
      const p = x.replace(/^0+(?=\d)/, '')
      const q = y.replace(/^0+(?=\d)/, '')
      if (p.length !== q.length) return p.length - q.length
      if (p !== q) return p < q ? -1 : 1
      // The same number written with other leading zeros: decided by what follows, then by length.
      continue
    }
    return x < y ? -1 : 1
  }
  return left.length - right.length || a.length - b.length || (a < b ? -1 : a > b ? 1 : 0)
}

/** Lower-case extension without the dot, or an empty text. */
export function extensionOf(name: string): string {
  const match = /\.([A-Za-z0-9]+)$/.exec(name)
  return match ? match[1]!.toLowerCase() : ''
}
