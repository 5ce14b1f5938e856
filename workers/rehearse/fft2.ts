/** Square two-dimensional complex transforms over fft.js, with tables and scratch made once. */
import FFT from 'fft.js'

export interface SquareTransform {
  readonly size: number
  /** 2 × size² interleaved complex numbers, row-major; transformed in place. Rows outside [firstRow, lastRow] must be zero. */
  forward(data: Float64Array, firstRow?: number, lastRow?: number): void
  /** Inverse, divided by size². */
  inverse(data: Float64Array): void
}

/** `size` is a power of two ≥ 2. */
export function createSquareTransform(size: number): SquareTransform {
  if (size < 2 || (size & (size - 1)) !== 0) throw new RangeError(`A transform needs a power of two, not ${size}.`)
  const fft = new FFT(size)
  const line = new Float64Array(2 * size)
  const answer = new Float64Array(2 * size)

  const rows = (data: Float64Array, from: number, to: number, inverse: boolean) => {
    for (let row = from; row <= to; row++) {
      const view = data.subarray(2 * size * row, 2 * size * (row + 1))
      line.set(view)
      if (inverse) fft.inverseTransform(answer, line)
      else fft.transform(answer, line)
      view.set(answer)
    }
  }
  const columns = (data: Float64Array, from: number, to: number, inverse: boolean) => {
    for (let column = 0; column < size; column++) {
      if (from > 0 || to < size - 1) line.fill(0)
      for (let row = from, at = 2 * (from * size + column); row <= to; row++, at += 2 * size) {
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
    forward(data, firstRow = 0, lastRow = size - 1) {
      rows(data, firstRow, lastRow, false)
      columns(data, firstRow, lastRow, false)
    },
    inverse(data) {
      rows(data, 0, size - 1, true)
      columns(data, 0, size - 1, true)
    },
  }
}
