/** Rows of a PNG image: filters undone, interlacing resolved, samples unpacked. */

/** Undoes the five filters of one pass in place; false where a filter type does not exist. `raw` holds rows of 1 + rowBytes. */
function unfilter(raw: Uint8Array, rows: number, rowBytes: number, step: number): boolean {
  for (let y = 0; y < rows; y++) {
    const start = y * (rowBytes + 1)
    const filter = raw[start]!
    const row = start + 1
    const above = row - rowBytes - 1
    for (let i = 0; i < rowBytes; i++) {
      const left = i >= step ? raw[row + i - step]! : 0
      const up = y > 0 ? raw[above + i]! : 0
      const corner = y > 0 && i >= step ? raw[above + i - step]! : 0
      let add: number
      if (filter === 0) add = 0
      else if (filter === 1) add = left
      else if (filter === 2) add = up
      else if (filter === 3) add = (left + up) >> 1
      else if (filter === 4) {
        const p = left + up - corner
        const a = Math.abs(p - left)
        const b = Math.abs(p - up)
        const c = Math.abs(p - corner)
        add = a <= b && a <= c ? left : b <= c ? up : corner
      }
      else return false
      raw[row + i] = raw[row + i]! + add
    }
  }
  return true
}

interface Pass { x: number, y: number, dx: number, dy: number }
const whole: Pass[] = [{ x: 0, y: 0, dx: 1, dy: 1 }]
const adam7: Pass[] = [
  { x: 0, y: 0, dx: 8, dy: 8 }, { x: 4, y: 0, dx: 8, dy: 8 }, { x: 0, y: 4, dx: 4, dy: 8 }, { x: 2, y: 0, dx: 4, dy: 4 },
  { x: 0, y: 2, dx: 2, dy: 4 }, { x: 1, y: 0, dx: 2, dy: 2 }, { x: 0, y: 1, dx: 1, dy: 2 },
]

function shapeOf(pass: Pass, width: number, height: number, bitsPerPixel: number) {
  const columns = Math.max(0, Math.ceil((width - pass.x) / pass.dx))
  const rows = columns === 0 ? 0 : Math.max(0, Math.ceil((height - pass.y) / pass.dy))
  return { columns, rows, rowBytes: Math.ceil(columns * bitsPerPixel / 8) }
}

/** Bytes of the inflated image. */
export function inflatedBytes(width: number, height: number, bitsPerPixel: number, interlaced: boolean): number {
  return (interlaced ? adam7 : whole).reduce((sum, pass) => {
    const { rows, rowBytes } = shapeOf(pass, width, height, bitsPerPixel)
    return sum + rows * (rowBytes + 1)
  }, 0)
}

/**
 * Samples in reading order, `channels` a pixel, as stored (16-bit ones assembled from their big-endian bytes).
 * Null where the data are damaged. `raw` is changed.
 */
export function unpackRows(raw: Uint8Array, width: number, height: number, bitDepth: number, channels: number, interlaced: boolean): Uint16Array<ArrayBuffer> | null {
  const out = new Uint16Array(width * height * channels)
  const bitsPerPixel = bitDepth * channels
  const step = Math.max(1, bitsPerPixel >> 3)
  let at = 0
  for (const pass of interlaced ? adam7 : whole) {
    const { columns, rows, rowBytes } = shapeOf(pass, width, height, bitsPerPixel)
    const part = raw.subarray(at, at + rows * (rowBytes + 1))
    if (!unfilter(part, rows, rowBytes, step)) return null
    at += part.byteLength
    for (let y = 0; y < rows; y++) {
      const row = y * (rowBytes + 1) + 1
      for (let x = 0; x < columns; x++) {
        const pixel = ((pass.y + y * pass.dy) * width + pass.x + x * pass.dx) * channels
        for (let c = 0; c < channels; c++) {
          const index = x * channels + c
          if (bitDepth === 16) out[pixel + c] = (part[row + 2 * index]! << 8) | part[row + 2 * index + 1]!
          else if (bitDepth === 8) out[pixel + c] = part[row + index]!
          else {
            const bit = index * bitDepth
            out[pixel + c] = (part[row + (bit >> 3)]! >> (8 - bitDepth - (bit & 7))) & ((1 << bitDepth) - 1)
          }
        }
      }
    }
  }
  return out
}
