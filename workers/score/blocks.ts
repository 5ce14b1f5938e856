/** Block means of a frame: the cheap first look by which targets are found and backgrounds measured. */

export interface Blocks {
  /** Side of a block, px. */
  readonly side: number
  readonly columns: number
  readonly rows: number
  readonly means: Float32Array
}

/** Side of a block: 4 px, less for small frames, more for large ones, so that there are some hundred to some thousand. */
export function blockSide(width: number, height: number): number {
  const shorter = Math.min(width, height)
  if (shorter < 48) return 2
  if (width * height <= 400_000) return 4
  return width * height <= 2_000_000 ? 8 : 16
}

export function createBlocks(width: number, height: number, side = blockSide(width, height)): Blocks {
  const columns = Math.max(1, Math.floor(width / side))
  const rows = Math.max(1, Math.floor(height / side))
  return { side, columns, rows, means: new Float32Array(columns * rows) }
}

/** Fills in the means; samples right of and below the last whole block are left out. */
export function fillBlocks(frame: Float32Array, width: number, blocks: Blocks): void {
  const { side, columns, rows, means } = blocks
  const scale = 1 / (side * side)
  means.fill(0)
  for (let y = 0; y < rows * side; y++) {
    const row = y * width
    const to = Math.floor(y / side) * columns
    if (side === 4) {
      for (let b = 0, x = row; b < columns; b++, x += 4) means[to + b]! += frame[x]! + frame[x + 1]! + frame[x + 2]! + frame[x + 3]!
    }
    else {
      for (let b = 0, x = row; b < columns; b++) {
        let s = 0
        for (let k = 0; k < side; k++, x++) s += frame[x]!
        means[to + b]! += s
      }
    }
  }
  for (let i = 0; i < means.length; i++) means[i]! *= scale
}

/** The value below which `share` of the first n values lie; the order of the values is changed. Quickselect. */
export function quantileInPlace(values: Float32Array, n: number, share: number): number {
  if (n === 0) return 0
  const k = Math.min(n - 1, Math.max(0, Math.floor(share * (n - 1) + 0.5)))
  let low = 0
  let high = n - 1
  while (low < high) {
    const pivot = values[(low + high) >> 1]!
    let i = low
    let j = high
    while (i <= j) {
      while (values[i]! < pivot) i++
      while (values[j]! > pivot) j--
      if (i <= j) {
        const t = values[i]!
        values[i] = values[j]!
        values[j] = t
        i++
        j--
      }
    }
    if (k <= j) high = j
    else if (k >= i) low = i
    else break
  }
  return values[k]!
}
