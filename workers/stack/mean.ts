/** Frames over each pixel; not whole where tiles share a pixel. */
export type Counts = Int32Array | Float64Array

/**
 * The mean of a fixed-point sum: sum / (scale × frames over the pixel), as float32.
 * Pixels that no frame covers repeat the nearest covered pixel of their row, then of their column, so that
 * edges neither glow nor go dark; `counts` says where that happened. With nothing covered the mean is 0.
 */
export function meanOf(sum: Float64Array, counts: Counts, scale: number, planes: number, out = new Float32Array(sum.length)): Float32Array {
  const size = counts.length
  for (let plane = 0; plane < planes; plane++) {
    const base = plane * size
    for (let i = 0; i < size; i++) {
      const n = counts[i]!
      out[base + i] = n > 0 ? sum[base + i]! / (n * scale) : 0
    }
  }
  return out
}

/** Fills uncovered pixels in place; cheap when there are none. */
export function fillUncovered(image: Float32Array, counts: Counts, width: number, height: number, planes: number): void {
  if (!hasUncovered(counts)) return
  const size = width * height
  for (let plane = 0; plane < planes; plane++) {
    const rowHas = new Uint8Array(height)
    for (let y = 0; y < height; y++) rowHas[y] = fillRow(image, counts, plane * size, y * width, width) ? 1 : 0
    fillRows(image, rowHas, plane * size, width, height)
  }
}

function hasUncovered(counts: Counts): boolean {
  for (let i = 0; i < counts.length; i++) if (counts[i]! <= 0) return true
  return false
}

function fillRow(image: Float32Array, counts: Counts, base: number, row: number, width: number): boolean {
  const near = nearest(width, x => counts[row + x]! > 0)
  if (!near) return false
  for (let x = 0; x < width; x++) if (near[x] !== x) image[base + row + x] = image[base + row + near[x]!]!
  return true
}

function fillRows(image: Float32Array, rowHas: Uint8Array, base: number, width: number, height: number): void {
  const near = nearest(height, y => rowHas[y] === 1)
  if (!near) return
  for (let y = 0; y < height; y++) {
    if (near[y] === y) continue
    const from = base + near[y]! * width
    image.copyWithin(base + y * width, from, from + width)
  }
}

/** For each place the nearest one that `has`, the smaller on a tie; null where none has. */
function nearest(length: number, has: (i: number) => boolean): Int32Array | null {
  const out = new Int32Array(length).fill(-1)
  let before = -1
  for (let i = 0; i < length; i++) {
    if (has(i)) before = i
    out[i] = before
  }
  if (before < 0) return null
  let after = -1
  for (let i = length - 1; i >= 0; i--) {
    if (has(i)) after = i
    if (after >= 0 && (out[i]! < 0 || after - i < i - out[i]!)) out[i] = after
  }
  return out
}
