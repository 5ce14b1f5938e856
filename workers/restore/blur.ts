/**
 * How much the air blurs an extended target, without knowing the target: the stacks of few and of many frames show the same
 * scene through transfers of different height, and their ratio at each frequency is free of the scene. What the theory of
 * selected exposures (air.ts) says of that ratio has one unknown, D/r0.
 */
import { steadyExp, steadyLn } from '../../shared/steadymath'
import { selectedStrehl, selectedTransfer } from './air'
import { signalShare, type RadialSpectra } from './spectra'

export interface Blur {
  /** Aperture over Fried's parameter. */
  apertureOverR0: number
  /** Its standard error, as far as noise and the misfit tell. */
  error: number
  /** λ/D, px: given, or found with the rest where optics are not known. */
  lambdaPx: number
}

/** Spectra of the best `share` of all frames of the capture. */
export interface Graded { share: number, spectra: RadialSpectra }

/** Ratios are compared up to here, in units of the cut-off: beyond, errors of registration count. */
const MOST_U = 0.22
/** What the theory may be off by, in ln of the ratio. */
const SLACK = 0.04

interface Point { f: number, share: number, lnRatio: number, weight: number }

/**
 * @param stacks two at least, of one plane; the one of most frames is compared with each other
 * @param lambdaPx λ/D in px, null where not known: then it is fitted with a prior about what cameras in use have (3.5 px, a
 * factor of 1.5 either way)
 * @returns null where the halves do not agree well enough anywhere
 */
export function estimateBlur(stacks: readonly Graded[], lambdaPx: number | null): Blur | null {
  const sorted = [...stacks].sort((a, b) => a.share - b.share)
  const all = sorted.pop()
  if (!all || sorted.length === 0) return null
  const scales = lambdaPx === null ? Array.from({ length: 25 }, (_, k) => 1.5 * steadyExp(0.075 * k)) : [lambdaPx]
  let best = { chi: Infinity, ratio: 0, scale: 0, points: 0 }
  const tried: { chi: number, ratio: number }[] = []
  for (const scale of scales) {
    const points = sorted.flatMap(stack => ratios(stack, all, MOST_U / scale))
    if (points.length < 6) continue
    const prior = lambdaPx === null ? (steadyLn(scale / 3.5) / 0.4) ** 2 : 0
    for (let ratio = 0.5; ratio <= 10; ratio *= 1.02) {
      const chi = misfit(points, scale, ratio, all.share) * 4 / (points.length + 4) + prior + (steadyLn(ratio / 4) / 0.8) ** 2
      tried.push({ chi, ratio })
      if (chi < best.chi) best = { chi, ratio, scale, points: points.length }
    }
  }
  if (best.points === 0) return null
  const near = tried.filter(({ chi }) => chi < best.chi + 1).map(({ ratio }) => ratio)
  return { apertureOverR0: best.ratio, error: Math.max(0.02 * best.ratio, 0.5 * (Math.max(...near) - Math.min(...near))), lambdaPx: best.scale }
}

/** ln of the transfer of one stack over that of all, by frequency; normalised where both are whole. */
function ratios(stack: Graded, all: Graded, most: number): Point[] {
  const { step } = all.spectra
  const points: Point[] = []
  for (let bin = 1; (bin + 0.5) * step < most && bin < all.spectra.signal.length; bin++) {
    const shares = [signalShare(stack.spectra, bin), signalShare(all.spectra, bin)]
    if (shares[0]! < 0.7 || shares[1]! < 0.7) break
    const variance = 0.25 * ((1 / shares[0]! - 1) + (1 / shares[1]! - 1)) / Math.max(1, all.spectra.count[bin]!)
    points.push({ f: (bin + 0.5) * step, share: stack.share, lnRatio: 0.5 * steadyLn(stack.spectra.signal[bin]! / all.spectra.signal[bin]!), weight: 1 / (variance + SLACK * SLACK) })
  }
  return points
}

/** Σ weight × (measured − theory)², each stack free by a factor of brightness. */
function misfit(points: readonly Point[], scale: number, ratio: number, allShare: number): number {
  let chi = 0
  for (let from = 0; from < points.length;) {
    let to = from
    let sum = 0
    let weights = 0
    const off: number[] = []
    while (to < points.length && points[to]!.share === points[from]!.share) {
      const { f, share, lnRatio, weight } = points[to]!
      const u = f * scale
      const d = lnRatio - steadyLn(selectedTransfer(u, share, ratio) / selectedTransfer(u, allShare, ratio))
      off.push(d)
      sum += weight * d
      weights += weight
      to++
    }
    for (let k = from; k < to; k++) chi += points[k]!.weight * (off[k - from]! - sum / weights) ** 2
    from = to
  }
  return chi
}

/** The transfer of the best `share` of frames at a frequency in cycles per px. */
export function blurTransfer({ apertureOverR0, lambdaPx }: Blur, share: number): (f: number) => number {
  return f => selectedTransfer(f * lambdaPx, share, apertureOverR0)
}

/** The expected Strehl ratio of that stack. */
export const blurStrehl = ({ apertureOverR0 }: Blur, share: number): number => selectedStrehl(share, apertureOverR0)
