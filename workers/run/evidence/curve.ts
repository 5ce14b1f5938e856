/** The keep curve: sharpness and noise of stacks at many fractions, from independent halves. */
import type { Evidence, EvidencePoint } from '../../../shared/schemas/evidence'
import { lambdaOverDPx } from '../../../shared/optics'
import { blurTransfer } from '../../restore/blur'
import type { Pause } from '../../restore/convolve'
import { steadyShare, type RadialSpectra } from '../../restore/spectra'
import { scoreColumn } from '../columns'
import type { RunState } from '../engine'
import { meanOfBest } from '../scatter'

/** Points of the curve at most. */
const POINTS = 18
/** The two transfers, in units of the cut-off D/λ; without optics λ/D counts as 4 px. */
const AT = [0.2, 0.3] as const
const USUAL_LAMBDA = 4

export type Curve = Pick<Evidence, 'measure' | 'frequencies' | 'absolute' | 'points'>

export async function keepCurve(state: RunState, pause: Pause): Promise<Curve> {
  return state.surveyed.survey.kind === 'star' ? await starCurve(state, pause) : await extendedCurve(state, pause)
}

/** Rungs at about equal ratios, from two frames to all. */
function chosenRungs(counts: readonly number[]): number[] {
  const usable = [...counts.keys()].filter(k => counts[k]! >= 2)
  if (usable.length <= POINTS) return usable
  const first = counts[usable[0]!]!
  const last = counts[usable[usable.length - 1]!]!
  const wanted = Array.from({ length: POINTS }, (_, i) => first * (last / first) ** (i / (POINTS - 1)))
  return [...new Set(wanted.map(n => usable.reduce((best, k) => (Math.abs(counts[k]! / n - 1) < Math.abs(counts[best]! / n - 1) ? k : best), usable[0]!)))].sort((a, b) => a - b)
}

async function starCurve({ stacker, figurer, ladder, optics }: RunState, pause: Pause): Promise<Curve> {
  const points: EvidencePoint[] = []
  for (const rung of chosenRungs(ladder.counts)) {
    const count = ladder.counts[rung]!
    const image = await stacker.stack(count)
    const figures = figurer.of(image)
    await pause()
    const core = optics && figures.strehl !== null ? null : figurer.core(image)
    const grain = figurer.grain(image, figures.fwhmPx ?? 4)
    if (grain === null) continue
    points.push({
      count, fraction: count / stacker.ranked, sharpness: core ? core.share : figures.strehl!,
      sharpnessErr: core ? core.error && core.error * core.share : figures.strehlErr ?? null, finer: null, finerErr: null, noise: grain, reachPx: null,
    })
    await pause()
  }
  if (optics) return { measure: 'strehl', frequencies: null, absolute: true, points }
  const most = Math.max(...points.map(point => point.sharpness), 1e-12)
  return { measure: 'core', frequencies: null, absolute: false, points: points.map(point => ({ ...point, sharpness: point.sharpness / most, sharpnessErr: point.sharpnessErr && point.sharpnessErr / most })) }
}

async function extendedCurve({ stacker, restorer, ladder, optics, graded, refined, ranking, measure }: RunState, pause: Pause): Promise<Curve> {
  const air = await restorer.air(pause)
  const lambda = optics ? lambdaOverDPx(optics) : air?.lambdaPx ?? USUAL_LAMBDA
  const frequencies = AT.map(u => Math.min(0.45, u / lambda)) as [number, number]
  const score = scoreColumn(graded.table, refined.shifts, measure)
  const found: { point: EvidencePoint, lower: Ring, higher: Ring }[] = []
  for (const rung of chosenRungs(ladder.counts)) {
    const spectra = restorer.spectra(rung)
    await pause()
    if (!spectra) continue
    const count = ladder.counts[rung]!
    const rings = frequencies.map(f => ringOf(spectra, f)) as [Ring, Ring]
    const selection = meanOfBest(ranking.order, score, count).error
    const error = (ring: Ring) => (selection === null || ring.signal <= 0 ? null : ring.amplitude * Math.sqrt(0.5 * ring.noise / ring.signal / ring.independent + selection * selection))
    found.push({
      lower: rings[0], higher: rings[1],
      point: {
        count, fraction: count / stacker.ranked, sharpness: rings[0].amplitude, sharpnessErr: error(rings[0]), finer: rings[1].amplitude, finerErr: error(rings[1]),
        noise: rings[1].signal > 0 ? Math.min(99, Math.sqrt(rings[1].noise / rings[1].signal)) : 99, reachPx: reachOf(spectra),
      },
    })
  }
  if (found.length === 0) return { measure: 'transfer', frequencies, absolute: false, points: [] }
  // Against the telescope alone where the air is known: the stack nearest to a tenth of the frames is the anchor.
  const anchor = found.reduce((best, each) => (Math.abs(each.point.fraction / 0.1 - 1) < Math.abs(best.point.fraction / 0.1 - 1) ? each : best), found[0]!)
  const transfer = air ? blurTransfer(air, anchor.point.count / graded.table.count) : null
  const usable = found.filter(each => each.point.count >= 4)
  const unit = (of: (point: EvidencePoint) => number, f: number) => (transfer ? transfer(f) / Math.max(1e-12, of(anchor.point)) : 1 / Math.max(1e-12, ...(usable.length > 0 ? usable : found).map(each => of(each.point))))
  const a = unit(point => point.sharpness, frequencies[0])
  const b = unit(point => point.finer!, frequencies[1])
  return {
    measure: 'transfer', frequencies, absolute: transfer !== null,
    points: found.map(({ point }) => ({ ...point, sharpness: a * point.sharpness, sharpnessErr: point.sharpnessErr && a * point.sharpnessErr, finer: b * point.finer!, finerErr: point.finerErr && b * point.finerErr })),
  }
}

interface Ring { amplitude: number, signal: number, noise: number, independent: number }

/** Signal and noise in a ring of a tenth to each side, its amplitude over that of coarse structure. */
function ringOf(spectra: RadialSpectra, f: number): Ring {
  const sum = (low: number, high: number) => {
    let signal = 0
    let noise = 0
    let independent = 0
    spectra.signal.forEach((value, i) => {
      const at = (i + 0.5) * spectra.step
      if (i === 0 || at < low || at > high) return
      signal += spectra.count[i]! * value
      noise += spectra.count[i]! * spectra.noise[i]!
      independent += spectra.count[i]!
    })
    const n = Math.max(1e-9, independent)
    return { signal: Math.max(0, signal / n), noise: noise / n, independent: Math.max(1, independent) }
  }
  const ring = sum(Math.min(0.9 * f, f - spectra.step), Math.max(1.1 * f, f + spectra.step))
  const coarse = sum(spectra.step, Math.max(0.25 * f, 2.5 * spectra.step))
  return { ...ring, amplitude: coarse.signal > 0 ? Math.sqrt(ring.signal / coarse.signal) : 0 }
}

/** Finest period, px, at which half of the stack's power is signal: a Fourier ring correlation of the halves of 1/3. */
function reachOf(spectra: RadialSpectra): number | null {
  const share = steadyShare(spectra)
  let last = -1
  share.forEach((value, i) => { if (value >= 0.5) last = i })
  return last < 0 ? null : 1 / ((last + 0.5) * spectra.step)
}
