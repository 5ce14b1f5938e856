/**
 * From the recipe and what was measured on the stacks to the numbers that a restoration works with. A plan is plain data: it is
 * filed with a run, so that anybody can restore the same way without the halves.
 */
import type { RestorePlan } from '../../shared/schemas/restoration'
import { restoringMethod, type Recipe } from '../../shared/schemas/recipe'
import type { TargetKind } from '../../shared/schemas/capture'
import { decompose, waveletNoise } from './atrous'
import { blurStrehl, blurTransfer, type Blur } from './blur'
import { curveAt, type RadialCurve } from './convolve'
import { wienerCurve } from './deconvolve'
import { fittingGains, type Known } from './gains'
import { coreAndHalo, TRANSFER_STEP } from './psf'
import { steadyShare, type RadialSpectra } from './spectra'

export interface Measured {
  kind: TargetKind
  /** Share of all frames in the stack. */
  share: number
  planes: MeasuredPlane[]
}

export interface MeasuredPlane {
  /** Signal and noise of the stack by frequency; null where there are no halves. */
  spectra: RadialSpectra | null
  /** Noise of each wavelet scale of the stack, sample units, finest first. */
  scaleNoise: number[]
  /** What differs from half to half, rms of the mean over all of the plane; null where there are no halves. */
  spread: number | null
  /** Level of the dark sky, sample units. */
  floor: number
  /** Extended targets: the air; null where the halves do not tell. */
  blur: Blur | null
  /** Stars: the transfer of the star image over the telescope's. */
  star: RadialCurve | null
}

const nothing = (reason: string): RestorePlan => ({ method: 'nothing', reason, planes: [], iterations: 0, stopAtNoise: false, strehl: null, apertureOverR0: null })

export function makePlan(restore: Recipe['restore'], measured: Measured): RestorePlan {
  const method = restoringMethod(restore.method, measured.kind)
  if (method === 'nothing') return nothing(measured.kind === 'star' && restore.method === null ? 'Stars are left as they are.' : '')
  const transfers = measured.planes.map(plane => transferOf(restore, measured, plane))
  const needed = method !== 'wavelets' || restore.gainBy === 'transfer'
  if (needed && transfers.some(transfer => transfer === null)) return nothing('Too few frames, or too little detail above the noise, to tell how much the air blurred: nothing is restored. Set the values yourself to restore all the same.')
  const blur = measured.planes[Math.min(1, measured.planes.length - 1)]!.blur
  const fromAir = restore.psf === 'capture' && measured.kind === 'extended' && blur !== null && needed
  return {
    method, reason: '', iterations: restore.iterations, stopAtNoise: restore.stop === 'noise',
    strehl: fromAir ? blurStrehl(blur, measured.share) : null, apertureOverR0: fromAir ? blur.apertureOverR0 : null,
    planes: measured.planes.map((plane, p) => {
      const transfer = transfers[p] ?? (() => 1)
      const noise = plane.spread ?? (plane.scaleNoise[0] ? plane.scaleNoise[0] / waveletNoise[0] : 0)
      if (method === 'wavelets') {
        const gains = restore.gainBy === 'transfer' ? fittingGains(knownOf(plane.spectra!, transfer), restore.scales) : restore.gains.slice(0, restore.scales)
        return { gains: gains.map(round), thresholds: gains.map((_, j) => (restore.gainBy === 'transfer' ? restore.thresholdSigma : restore.thresholdsSigma[j]!) * (plane.scaleNoise[j] ?? 0)), curve: null, floor: plane.floor, noise }
      }
      const curve = method === 'wiener' ? wienerCurve(transfer, plane.spectra, restore.snr) : { step: TRANSFER_STEP, values: Array.from({ length: 92 }, (_, i) => transfer(i * TRANSFER_STEP)) }
      return { gains: [], thresholds: [], curve: { step: curve.step, values: [...curve.values] }, floor: plane.floor, noise }
    }),
  }
}

/**
 * A plan where no halves are at hand: gains by hand need none, the noise being taken from the image's finest scale; anything
 * else cannot be measured. For runs filed without their plan.
 */
export function planByHand(restore: Recipe['restore'], kind: TargetKind, samples: Float32Array, width: number, height: number, planes: number): RestorePlan {
  const size = width * height
  const byHand = restoringMethod(restore.method, kind) === 'wavelets' && restore.gainBy === 'hand'
  if (!byHand) return nothing(restoringMethod(restore.method, kind) === 'nothing' ? '' : 'This run was filed without what its restoration needs.')
  return makePlan(restore, {
    kind, share: 1,
    planes: Array.from({ length: planes }, (_, p) => ({ spectra: null, scaleNoise: ownNoise(samples.subarray(p * size, (p + 1) * size), width, height), spread: null, floor: 0, blur: null, star: null })),
  })
}

/** Noise of each scale from the finest one alone: its scatter, taken for that of white noise. */
export function ownNoise(image: Float32Array, width: number, height: number): number[] {
  const sigma = robustSigma(decompose(image, width, height, 1).details[0]!) / waveletNoise[0]
  return waveletNoise.map(share => share * sigma)
}

/** 1.4826 × the median absolute value: the standard deviation of Gaussian noise about 0, which small features do not move. */
export function robustSigma(values: Float32Array): number {
  const sorted = Float32Array.from(values, Math.abs).sort()
  return sorted.length === 0 ? 0 : 1.4826 * 0.5 * (sorted[(sorted.length - 1) >> 1]! + sorted[sorted.length >> 1]!)
}

/** Gains to a thousandth; within 2 % of 1 a scale is left as it is. */
const round = (gain: number): number => (Math.abs(gain - 1) < 0.02 ? 1 : Math.round(gain * 1000) / 1000)

function transferOf(restore: Recipe['restore'], { kind, share }: Measured, plane: MeasuredPlane): ((f: number) => number) | null {
  if (restore.psf === 'analytic') return coreAndHalo(restore.psfCore, restore.psfHaloPx)
  if (restore.psf === 'reference') {
    const reference = restore.psfReference
    return reference ? f => curveAt(reference, f) : null
  }
  if (kind === 'star') return plane.star ? f => curveAt(plane.star!, f) : null
  return plane.blur && plane.spectra ? blurTransfer(plane.blur, share) : null
}

/** Signal and noise with the agreement smoothed, so that a chance figure of one frequency asks for nothing. */
function knownOf(spectra: RadialSpectra, transfer: (f: number) => number): Known[] {
  const share = steadyShare(spectra)
  const known: Known[] = []
  for (let i = 0; i < share.length; i++) {
    const power = Math.max(0, spectra.signal[i]!) + spectra.noise[i]!
    const f = (i + 0.5) * spectra.step
    if (power > 0) known.push({ f, signal: share[i]! * power, noise: (1 - share[i]!) * power, transfer: transfer(f), count: spectra.count[i]! })
  }
  return known
}
