/**
 * The smoothing at which extended targets are judged.
 *
 * How sharp a frame is must be the same story in every part of the target. The frame is therefore cut into a chequer
 * of tiles, both colours of the chequer are scored by themselves, and the two scores are correlated over the
 * surveyed frames (split-half reliability; Spearman 1910, Brown 1910, Br. J. Psychol. 3). Grain makes the two
 * disagree, sharpness makes them agree. The least smoothing that is nearly as reliable as the best one is taken: more would
 * only hide fine detail, which is what tells the best frames apart.
 */
import { createWindowBlur } from './blur'

const SIGMAS = [0.5, 0.7, 1, 1.3, 1.6, 2, 2.5, 3]
const TILE = 16
/** Reliability relative to the best that counts as nearly as good. */
const NEARLY = 0.99
/** With fewer frames than this a correlation says nothing. */
const LEAST_FRAMES = 12
const MOST_FRAMES = 32
const MOST_SIDE = 176
/** What is taken where nothing can be told. */
const FALLBACK = 1.5

/**
 * @param places where the target lies in each frame, px, so that the same part is looked at
 * @returns sigma of the Gaussian, px
 */
export function chooseExtendedBlur(frames: Float32Array[], width: number, height: number, places: { x: number, y: number }[], sidePx: number): number {
  if (frames.length < LEAST_FRAMES) return FALLBACK
  const columns = Math.min(width, sidePx, MOST_SIDE)
  const rows = Math.min(height, sidePx, MOST_SIDE)
  const every = Math.max(1, Math.ceil(frames.length / MOST_FRAMES))
  const used = frames.map((_, i) => i).filter(i => i % every === 0)
  let image = new Float32Array(columns * rows)
  let next = new Float32Array(columns * rows)
  const odd = SIGMAS.map(() => new Float64Array(used.length))
  const even = SIGMAS.map(() => new Float64Array(used.length))
  // Each smoothing goes on from the one before: variances of Gaussians add.
  const steps = SIGMAS.map((sigma, i) => createWindowBlur(Math.sqrt(sigma * sigma - (i > 0 ? SIGMAS[i - 1]! ** 2 : 0)), columns, rows))
  for (const [f, index] of used.entries()) {
    const x0 = Math.max(0, Math.min(width - columns, Math.round(places[index]!.x) - (columns >> 1)))
    const y0 = Math.max(0, Math.min(height - rows, Math.round(places[index]!.y) - (rows >> 1)))
    steps[0]!.blur(frames[index]!, width, height, x0, y0, columns, rows, image)
    let mean = 0
    for (let i = 0; i < image.length; i++) mean += image[i]!
    mean /= image.length
    for (let k = 0; k < SIGMAS.length; k++) {
      if (k > 0) {
        steps[k]!.blur(image, columns, rows, 0, 0, columns, rows, next)
        const t = image
        image = next
        next = t
      }
      halves(image, columns, rows, mean, odd[k]!, even[k]!, f)
    }
  }
  const reliability = SIGMAS.map((_, k) => correlation(odd[k]!, even[k]!))
  const best = Math.max(...reliability)
  if (!(best > 0.3)) return FALLBACK
  return SIGMAS[reliability.findIndex(r => r >= NEARLY * best)]!
}

/** Laplacian energy over squared brightness in the two colours of the chequer. */
function halves(image: Float32Array, columns: number, rows: number, mean: number, odd: Float64Array, even: Float64Array, f: number): void {
  let a = 0
  let b = 0
  let na = 0
  let nb = 0
  for (let y = 1; y < rows - 1; y++) {
    const stripe = Math.floor(y / TILE)
    for (let x = 1; x < columns - 1; x++) {
      const i = y * columns + x
      const l = image[i - columns]! + image[i + columns]! + image[i - 1]! + image[i + 1]! - 4 * image[i]!
      if ((stripe + Math.floor(x / TILE)) & 1) { a += l * l; na++ }
      else { b += l * l; nb++ }
    }
  }
  const scale = mean * mean || 1
  odd[f] = na > 0 ? a / na / scale : 0
  even[f] = nb > 0 ? b / nb / scale : 0
}

function correlation(a: Float64Array, b: Float64Array): number {
  const n = a.length
  let ma = 0
  let mb = 0
  for (let i = 0; i < n; i++) { ma += a[i]!; mb += b[i]! }
  ma /= n
  mb /= n
  let ab = 0
  let aa = 0
  let bb = 0
  for (let i = 0; i < n; i++) {
    ab += (a[i]! - ma) * (b[i]! - mb)
    aa += (a[i]! - ma) ** 2
    bb += (b[i]! - mb) ** 2
  }
  return aa > 0 && bb > 0 ? ab / Math.sqrt(aa * bb) : 0
}
