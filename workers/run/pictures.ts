import type { StackImage } from '../api'
import { keepCount, proofFractions } from '../../shared/schemas/run'
import type { Engine } from './engine'

/** An image with its longer side at most `most` px, by means over the covered pixels; itself where it is small enough. */
export function reduced(image: StackImage, most: number): StackImage {
  const { width, height, planes, samples } = image
  const ratio = Math.max(width, height) / most
  if (ratio <= 1) return image
  const w = Math.max(1, Math.round(width / ratio))
  const h = Math.max(1, Math.round(height / ratio))
  const out = new Float32Array(w * h * planes)
  for (let plane = 0; plane < planes; plane++) {
    for (let y = 0; y < h; y++) {
      const top = Math.floor(y * height / h), bottom = Math.max(top + 1, Math.floor((y + 1) * height / h))
      for (let x = 0; x < w; x++) {
        const left = Math.floor(x * width / w), right = Math.max(left + 1, Math.floor((x + 1) * width / w))
        let sum = 0
        for (let v = top; v < bottom; v++) for (let u = left; u < right; u++) sum += samples[(plane * height + v) * width + u]!
        out[(plane * h + y) * w + x] = sum / ((bottom - top) * (right - left))
      }
    }
  }
  return { ...image, width: w, height: h, samples: out }
}

const CELL = 240
const GAP = 8
const COLUMNS = 4

/** The unregistered average and the proofs on one sheet, in rows of four: average, 1 %, 2 %, 5 %; 10, 20, 50, 100 %. */
export async function proofSheet(engine: Engine): Promise<StackImage> {
  const { stacker } = engine.state!
  const cells = [reduced(engine.averageShown(), CELL)]
  for (const fraction of proofFractions) cells.push(reduced(await stacker.stack(keepCount(fraction, stacker.ranked)), CELL))
  const { width: w, height: h, planes } = cells[0]!
  const rows = Math.ceil(cells.length / COLUMNS)
  const width = COLUMNS * w + (COLUMNS - 1) * GAP
  const height = rows * h + (rows - 1) * GAP
  const samples = new Float32Array(width * height * planes).fill(Number.NEGATIVE_INFINITY)
  cells.forEach((cell, k) => {
    const left = (k % COLUMNS) * (w + GAP), top = Math.floor(k / COLUMNS) * (h + GAP)
    for (let plane = 0; plane < planes; plane++) {
      for (let y = 0; y < h; y++) {
        samples.set(cell.samples.subarray((plane * h + y) * w, (plane * h + y + 1) * w), (plane * height + top + y) * width + left)
      }
    }
  })
  return { width, height, planes, samples, count: 0, restored: false }
}
