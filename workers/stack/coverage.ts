import type { Covered } from './accumulate'

/**
 * How many frames cover each pixel, kept as corner marks: a frame covers a rectangle, so it costs four
 * additions, and counts are the double prefix sum of the marks. Size (width + 1) × (height + 1).
 */
export type CoverageMarks = Int32Array

export const coverageMarks = (width: number, height: number): CoverageMarks => new Int32Array((width + 1) * (height + 1))

export function markCovered(marks: CoverageMarks, width: number, covered: Covered, sign: 1 | -1): void {
  const { x0, y0, x1, y1 } = covered
  if (x1 <= x0 || y1 <= y0) return
  const stride = width + 1
  marks[y0 * stride + x0]! += sign
  marks[y0 * stride + x1]! -= sign
  marks[y1 * stride + x0]! -= sign
  marks[y1 * stride + x1]! += sign
}

/** Frames over each pixel, width × height, row-major. */
export function coverageCounts(marks: CoverageMarks, width: number, height: number, out = new Int32Array(width * height)): Int32Array {
  const stride = width + 1
  for (let y = 0; y < height; y++) {
    let run = 0
    for (let x = 0; x < width; x++) {
      run += marks[y * stride + x]!
      out[y * width + x] = run + (y > 0 ? out[(y - 1) * width + x]! : 0)
    }
  }
  return out
}
