/**
 * How much the air blurs an extended target, without knowing the target. Stacks of few and of many frames show the same scene
 * through transfers of different height, and their ratio at each frequency is free of the scene; the table of selected exposures
 * (air.ts) says what it is for each D/r0. Two things are fitted with it: selection also finds calmer moments, in which D/r0 is
 * smaller (the best share p sees D/r0 × p^γ); and where optics are known the image's own motion bounds D/r0, because strong
 * air and moderate air differ little in that ratio.
 */
import { steadyExp, steadyLn } from '../../shared/steadymath'
import { lnSelectedTransfer, ratioFromMotion, selectedTransfer } from './air'
import { signalShare, type RadialSpectra } from './spectra'

export interface Blur {
  /** Aperture over Fried's parameter, all frames. */
  apertureOverR0: number
  /** γ: the best share p of the frames sees D/r0 × p^γ. */
  calmer: number
  /** λ/D, px: given, or found with the rest where optics are not known. */
  lambdaPx: number
}

/** Spectra of the best `share` of all frames of the capture. */
export interface Graded { share: number, spectra: RadialSpectra }

/** Ratios are compared up to here, in units of the cut-off. */
const MOST_U = 0.3
/** What the table may be off by, in ln of the ratio. */
const SLACK = 0.03
/** Standard deviations, in ln unless said otherwise, of what is known beforehand. */
const PRIOR = {
  /** γ itself. */
  calmer: 0.05,
  /** D/r0 above and below that of the motion: shake and drift add to it, a finite outer scale takes from it. */
  above: 0.25, below: 0.6,
  /** Without motion: D/r0 about 4, λ/D about 3.5 px. */
  ratio: 0.8, lambda: 0.4,
}
/** What an outer scale of some 25 m takes from the D/r0 of the motion. */
const OUTER = 1.2

interface Point { f: number, share: number, lnRatio: number, weight: number }

/**
 * @param stacks two at least, of one plane; the one of most frames is compared with each other
 * @param lambdaPx λ/D in px, null where not known
 * @param motionPx rms motion of the image on one axis, px, slow drift taken out; null where not known
 * @returns null where the halves do not agree well enough anywhere
 */
export function estimateBlur(stacks: readonly Graded[], lambdaPx: number | null, motionPx: number | null): Blur | null {
  const sorted = [...stacks].sort((a, b) => a.share - b.share)
  const all = sorted.pop()
  if (!all || sorted.length === 0) return null
  const lambdas = lambdaPx === null ? Array.from({ length: 13 }, (_, k) => 1.5 * steadyExp(0.15 * k)) : [lambdaPx]
  let best: { chi: number, blur: Blur | null } = { chi: Infinity, blur: null }
  for (const lambda of lambdas) {
    const points = sorted.map(stack => ratios(stack, all, MOST_U / lambda)).filter(list => list.length > 2)
    const count = points.reduce((sum, list) => sum + list.length, 0)
    if (count < 6) continue
    const moved = lambdaPx !== null && motionPx !== null && motionPx > 0 ? OUTER * ratioFromMotion(motionPx, lambda) : null
    for (let ratio = 0.5; ratio <= 10; ratio *= 1.04) {
      const off = steadyLn(ratio / (moved ?? 4))
      const before = moved === null ? (off / PRIOR.ratio) ** 2 : (off / (off > 0 ? PRIOR.above : PRIOR.below)) ** 2
      const given = before + (lambdaPx === null ? (steadyLn(lambda / 3.5) / PRIOR.lambda) ** 2 : 0)
      if (given >= best.chi) continue
      for (let calmer = 0; calmer <= 0.3; calmer += 0.05) {
        const chi = given + (calmer / PRIOR.calmer) ** 2 + misfit(points, lambda, ratio, calmer, all.share) * 4 / (count + 4)
        if (chi < best.chi) best = { chi, blur: { apertureOverR0: ratio, calmer, lambdaPx: lambda } }
      }
    }
  }
  return best.blur
}

/** ln of the transfer of one stack over that of all, by frequency. */
function ratios(stack: Graded, all: Graded, most: number): Point[] {
  const { step } = all.spectra
  const points: Point[] = []
  for (let bin = 1; (bin + 0.5) * step < most && bin < all.spectra.signal.length; bin++) {
    const one = signalShare(stack.spectra, bin)
    const other = signalShare(all.spectra, bin)
    if (one < 0.7 || other < 0.7) break
    const variance = 0.25 * ((1 / one - 1) + (1 / other - 1)) / Math.max(1, all.spectra.count[bin]!)
    points.push({ f: (bin + 0.5) * step, share: stack.share, lnRatio: 0.5 * steadyLn(stack.spectra.signal[bin]! / all.spectra.signal[bin]!), weight: 1 / (variance + SLACK * SLACK) })
  }
  return points
}

const ratioOf = (ratio: number, share: number, calmer: number): number => ratio * steadyExp(calmer * steadyLn(share))

/** Σ weight × (measured − table)², each stack free by a factor of brightness. */
function misfit(lists: readonly (readonly Point[])[], lambda: number, ratio: number, calmer: number, allShare: number): number {
  let chi = 0
  for (const points of lists) {
    let sum = 0
    let weights = 0
    const off = points.map(({ f, share, lnRatio, weight }) => {
      const d = lnRatio - (lnSelectedTransfer(f * lambda, share, ratioOf(ratio, share, calmer)) - lnSelectedTransfer(f * lambda, allShare, ratioOf(ratio, allShare, calmer)))
      sum += weight * d
      weights += weight
      return d
    })
    points.forEach(({ weight }, k) => { chi += weight * (off[k]! - sum / weights) ** 2 })
  }
  return chi
}

/** The transfer of the best `share` of frames at a frequency in cycles per px. */
export function blurTransfer({ apertureOverR0, calmer, lambdaPx }: Blur, share: number): (f: number) => number {
  const ratio = ratioOf(apertureOverR0, Math.min(1, Math.max(0.001, share)), calmer)
  return f => selectedTransfer(f * lambdaPx, share, ratio)
}

/** The same at half of the cut-off, where only the core is left: about the Strehl ratio of the stack. */
export const blurStrehl = (blur: Blur, share: number): number => blurTransfer(blur, share)(0.5 / blur.lambdaPx)

/**
 * Motion of an image from its shifts in order of time: scatter (robust) about a parabola on each axis, the root of the mean square of
 * both, px. Null for fewer than 20 frames.
 */
export function motionOf(shifts: readonly { time: number, dx: number, dy: number }[]): number | null {
  if (shifts.length < 20) return null
  const axis = (of: (shift: { dx: number, dy: number }) => number) => {
    const values = shifts.map(of)
    const rest = offParabola(shifts.map(shift => shift.time), values)
    const sorted = Float64Array.from(rest, Math.abs).sort()
    return 1.4826 * sorted[sorted.length >> 1]!
  }
  const x = axis(shift => shift.dx)
  const y = axis(shift => shift.dy)
  return Math.sqrt(0.5 * (x * x + y * y))
}

/** What a least-squares parabola leaves; orthogonal polynomials on the given times. */
function offParabola(times: number[], values: number[]): number[] {
  const n = times.length
  const mean = (list: readonly number[]) => list.reduce((sum, v) => sum + v, 0) / n
  const centred = (list: readonly number[]) => { const m = mean(list); return list.map(v => v - m) }
  const dot = (a: readonly number[], b: readonly number[]) => a.reduce((sum, v, i) => sum + v * b[i]!, 0)
  const without = (a: readonly number[], b: readonly number[]) => { const bb = dot(b, b); return bb > 0 ? a.map((v, i) => v - dot(a, b) / bb * b[i]!) : [...a] }
  const t = centred(times)
  const square = without(centred(t.map(v => v * v)), t)
  return without(without(centred(values), t), square)
}
