/**
 * Whether a capture's frames confirm each other. Registration draws its reference out of pure noise (Henderson 2013, PNAS 110,
 * 18037): a stack that looks like the reference proves nothing. Here each frame's pixels are dealt out like the fields of a
 * chessboard: the shift is found on the black ones, and what is stacked is the white ones, of frames that the reference was not made
 * of. In noise the white pixels know nothing of the black ones' shift, and the stack does not correlate with the reference.
 */
import { createRegistrar, emptyShift } from '../../register/registrar'
import type { RegisterPlan } from '../../register/types'
import { createScorer, emptyScore } from '../../score/scorer'
import type { ScorePlan } from '../../score/types'
import type { ScoreMeasure } from '../../../shared/schemas/recipe'

/** Pixels of one colour of the chessboard; the others are the mean of their four neighbours, which are of that colour. */
export function chessHalf(frame: Float32Array, width: number, height: number, colour: 0 | 1, out: Float32Array): void {
  for (let y = 0; y < height; y++) {
    const up = (y > 0 ? y - 1 : 1) * width
    const down = (y < height - 1 ? y + 1 : height - 2) * width
    const row = y * width
    for (let x = 0; x < width; x++) {
      if (((x + y) & 1) === colour) out[row + x] = frame[row + x]!
      else out[row + x] = 0.25 * (frame[up + x]! + frame[down + x]! + frame[row + (x > 0 ? x - 1 : 1)]! + frame[row + (x < width - 1 ? x + 1 : width - 2)]!)
    }
  }
}

export interface Confirmed { confirmed: number | null, drawn: number | null, reliability: number | null }

/** Fewest frames that can confirm anything. */
const FEWEST = 8

export interface ConfirmInput { score: ScorePlan, register: RegisterPlan, by: ScoreMeasure, frames: AsyncIterable<Float32Array> }

/** @param input luminance of frames that the reference was not made of; each array may be reused once the next is asked for */
export async function confirm({ score: plan, register, by, frames }: ConfirmInput): Promise<Confirmed> {
  const { width, height } = plan
  const scorer = createScorer(plan)
  const registrar = createRegistrar(register)
  const black = new Float32Array(width * height)
  const white = new Float32Array(width * height)
  const sums = [new Float64Array(width * height), new Float64Array(width * height)] as const
  const scores: [number[], number[]] = [[], []]
  const judge = (image: Float32Array) => {
    const score = emptyScore()
    const shift = emptyShift()
    scorer.score(image, 0, score)
    registrar.register(image, score.x, score.y, shift)
    return { shift, value: by === 'transfer' ? shift.transfer : by === 'peak' ? score.peak : score.laplacian }
  }
  let count = 0
  for await (const frame of frames) {
    chessHalf(frame, width, height, 0, black)
    chessHalf(frame, width, height, 1, white)
    const one = judge(black)
    const other = judge(white)
    if (Number.isFinite(one.value) && Number.isFinite(other.value)) {
      scores[0].push(one.value)
      scores[1].push(other.value)
    }
    const dx = Math.round(one.shift.dx)
    const dy = Math.round(one.shift.dy)
    if (!Number.isFinite(dx) || !Number.isFinite(dy)) continue
    addMoved(white, width, height, dx, dy, sums[0])
    addMoved(black, width, height, dx, dy, sums[1])
    count++
  }
  if (count < FEWEST) return { confirmed: null, drawn: null, reliability: null }
  const window = { x: register.refX, y: register.refY, side: register.form === 'field' ? Math.max(width, height) : Math.min(register.windowPx, 96) }
  return {
    confirmed: correlation(sums[0], register.reference, width, height, window),
    drawn: correlation(sums[1], register.reference, width, height, window),
    reliability: scores[0].length >= FEWEST ? reliabilityOf(rankCorrelation(scores[0], scores[1])) : null,
  }
}

/** Spearman and Brown 1910: reliability of the whole from the correlation of its halves. */
const reliabilityOf = (r: number): number => (r > -1 ? 2 * r / (1 + r) : -1)

function addMoved(frame: Float32Array, width: number, height: number, dx: number, dy: number, sum: Float64Array): void {
  for (let y = 0; y < height; y++) {
    const row = Math.min(height - 1, Math.max(0, y - dy)) * width
    for (let x = 0; x < width; x++) sum[y * width + x]! += frame[row + Math.min(width - 1, Math.max(0, x - dx))]!
  }
}

/** Pearson's correlation of two images in a window, each blurred by 3 × 3 px against the chessboard's pattern. */
export function correlation(a: ArrayLike<number>, b: ArrayLike<number>, width: number, height: number, { x, y, side }: { x: number, y: number, side: number }): number {
  const x0 = Math.max(1, Math.round(x - side / 2))
  const x1 = Math.min(width - 1, Math.round(x + side / 2))
  const y0 = Math.max(1, Math.round(y - side / 2))
  const y1 = Math.min(height - 1, Math.round(y + side / 2))
  let n = 0, sa = 0, sb = 0, saa = 0, sbb = 0, sab = 0
  const soft = (of: ArrayLike<number>, at: number) => {
    let sum = 0
    for (let j = -1; j <= 1; j++) for (let k = -1; k <= 1; k++) sum += (2 - Math.abs(j)) * (2 - Math.abs(k)) * of[at + j * width + k]!
    return sum / 16
  }
  for (let row = y0; row < y1; row++) {
    for (let column = x0; column < x1; column++) {
      const p = soft(a, row * width + column)
      const q = soft(b, row * width + column)
      n++
      sa += p
      sb += q
      saa += p * p
      sbb += q * q
      sab += p * q
    }
  }
  const va = saa / n - (sa / n) ** 2
  const vb = sbb / n - (sb / n) ** 2
  return va > 0 && vb > 0 ? (sab / n - sa / n * (sb / n)) / Math.sqrt(va * vb) : 0
}

/** Spearman's rank correlation; ties get their mean rank. */
export function rankCorrelation(a: readonly number[], b: readonly number[]): number {
  const x = ranks(a)
  const y = ranks(b)
  const middle = (a.length - 1) / 2
  let xy = 0, xx = 0, yy = 0
  for (let i = 0; i < x.length; i++) {
    xy += (x[i]! - middle) * (y[i]! - middle)
    xx += (x[i]! - middle) ** 2
    yy += (y[i]! - middle) ** 2
  }
  return xx > 0 && yy > 0 ? xy / Math.sqrt(xx * yy) : 0
}

function ranks(values: readonly number[]): number[] {
  const order = values.map((_, i) => i).sort((i, j) => values[i]! - values[j]! || i - j)
  const out = new Array<number>(values.length)
  for (let from = 0; from < order.length;) {
    let to = from
    while (to + 1 < order.length && values[order[to + 1]!] === values[order[from]!]) to++
    for (let k = from; k <= to; k++) out[order[k]!] = 0.5 * (from + to)
    from = to + 1
  }
  return out
}
