/** Square two-dimensional complex transforms over fft.js, with tables and scratch made once. */
import FFT from 'fft.js'

/** Rows `start` … `start + count − 1`, counted round the end. */
export interface Rows { start: number, count: number }

export interface SquareTransform {
  readonly size: number
  /**
   * 2 × size² interleaved complex numbers, row-major; transformed in place. Only the rows named may hold anything; only
   * columns of frequency −band … band are transformed, the others hold nothing useful afterwards.
   */
  forward(data: Float64Array, rows?: Rows, band?: number): void
  /** Inverse, divided by size². Only frequencies −band … band across may hold anything; only the rows named are made. */
  inverse(data: Float64Array, rows?: Rows, band?: number): void
}

/** `size` is a power of two ≥ 2. */
export function createSquareTransform(size: number): SquareTransform {
  if (size < 2 || (size & (size - 1)) !== 0) throw new RangeError(`A transform needs a power of two, not ${size}.`)
  const fft = new FFT(size)
  const mask = size - 1
  const line = new Float64Array(2 * size)
  const answer = new Float64Array(2 * size)
  const all: Rows = { start: 0, count: size }

  const alongRows = (data: Float64Array, { start, count }: Rows, inverse: boolean) => {
    for (let i = 0; i < count; i++) {
      const row = (start + i) & mask
      const view = data.subarray(2 * size * row, 2 * size * (row + 1))
      line.set(view)
      if (inverse) fft.inverseTransform(answer, line)
      else fft.transform(answer, line)
      view.set(answer)
    }
  }
  const alongColumns = (data: Float64Array, { start, count }: Rows, band: number, inverse: boolean) => {
    if (count < size) line.fill(0)
    for (let column = 0; column < size; column++) {
      if (column > band && column < size - band) continue
      for (let i = 0; i < count; i++) {
        const row = (start + i) & mask
        const at = 2 * (row * size + column)
        line[2 * row] = data[at]!
        line[2 * row + 1] = data[at + 1]!
      }
      if (inverse) fft.inverseTransform(answer, line)
      else fft.transform(answer, line)
      for (let row = 0, at = 2 * column; row < size; row++, at += 2 * size) {
        data[at] = answer[2 * row]!
        data[at + 1] = answer[2 * row + 1]!
      }
    }
  }
  return {
    size,
    forward(data, rows = all, band = size / 2) {
      alongRows(data, rows, false)
      alongColumns(data, rows, band, false)
    },
    inverse(data, rows = all, band = size / 2) {
      alongColumns(data, all, band, true)
      alongRows(data, rows, true)
    },
  }
}
