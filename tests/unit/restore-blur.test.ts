/** The air found from stacks of few and of many frames, and the gains that follow. */
import { describe, expect, it } from 'vitest'
import { ratioFromMotion, selectedTransfer } from '../../workers/restore/air'
import { blurTransfer, estimateBlur, motionOf } from '../../workers/restore/blur'
import { fittingGains, scaleTransfers } from '../../workers/restore/gains'
import { radialSpectra, signalShare, type RadialSpectra } from '../../workers/restore/spectra'
import { gaussianNoise } from './support/noise'

/** Spectra of a scene of power f^−3 through a transfer, with white noise. */
function spectraOf(transfer: (f: number) => number, noise: number): RadialSpectra {
  const step = 1 / 128
  const f = Array.from({ length: 64 }, (_, i) => (i + 0.5) * step)
  return { step, signal: Float64Array.from(f, v => transfer(v) ** 2 * v ** -3), noise: new Float64Array(64).fill(noise), count: Float64Array.from(f, (_, i) => 10 * i + 5) }
}

describe('the air from the ratio of stacks', () => {
  const lambdaPx = 3.6
  const stacks = (ratio: number) => [0.05, 0.1, 0.2, 0.5, 1].map(share => ({ share, spectra: spectraOf(f => selectedTransfer(f * lambdaPx, share, ratio), 1e-4 / share) }))
  it.each([2, 3, 4.5, 7])('finds D/r0 = %d with known optics', (ratio) => {
    // Image motion of that ratio, a fifth less for an outer scale: σ = 0.427 (D/r0)^(5/6) λ/D.
    const blur = estimateBlur(stacks(ratio), lambdaPx, 0.427 * (ratio / 1.2) ** (5 / 6) * lambdaPx)!
    expect(Math.abs(blur.apertureOverR0 / ratio - 1)).toBeLessThan(0.12)
    for (const f of [0.03, 0.06, 0.1]) expect(Math.abs(blurTransfer(blur, 0.1)(f) / selectedTransfer(f * lambdaPx, 0.1, ratio) - 1)).toBeLessThan(0.15)
  })
  it('finds nearly the same transfer without knowing the optics', () => {
    const blur = estimateBlur(stacks(4), null, null)!
    for (const f of [0.03, 0.06, 0.1]) expect(Math.abs(blurTransfer(blur, 0.1)(f) - selectedTransfer(f * lambdaPx, 0.1, 4))).toBeLessThan(0.12)
  })
  it('says nothing where noise covers the detail', () => {
    expect(estimateBlur([0.1, 1].map(share => ({ share, spectra: spectraOf(() => 1, 1e9) })), lambdaPx, 4)).toBeNull()
  })
  it('has a plateau near the Strehl ratio of selected exposures', () => {
    // Independent calculation (275 Zernike modes, Noll's covariances): mean Strehl of the best 10 % at D/r0 = 2, 3, 4 0.811, 0.683,
    // 0.548; of all 0.646, 0.452, 0.321. Ranking and registration on a target that is no star lose some of it.
    for (const [ratio, best, all] of [[2, 0.811, 0.646], [3, 0.683, 0.452], [4, 0.548, 0.321]] as const) {
      expect(selectedTransfer(0.4, 0.1, ratio) / best).toBeGreaterThan(0.9)
      expect(selectedTransfer(0.4, 0.1, ratio) / best).toBeLessThan(1.03)
      expect(selectedTransfer(0.4, 1, ratio) / all).toBeGreaterThan(0.7)
      expect(selectedTransfer(0.4, 1, ratio) / all).toBeLessThan(1.03)
    }
  })
  it('takes a drift out of the motion, and D/r0 from what is left', () => {
    const random = gaussianNoise(9)
    const shifts = Array.from({ length: 400 }, (_, time) => ({ time, dx: 0.3 * time + 4 * random(), dy: 2e-4 * time * time + 4 * random() }))
    expect(Math.abs(motionOf(shifts)! / 4 - 1)).toBeLessThan(0.1)
    // 0.440″ rms on one axis at D = 10 cm, r0 = 10 cm, 500 nm, where λ/D is 1.031″.
    expect(ratioFromMotion(0.440, 1.0313)).toBeCloseTo(1, 2)
  })
})

describe('gains from transfer and noise', () => {
  const f = Array.from({ length: 64 }, (_, i) => (i + 0.5) / 128)
  const known = (transfer: (f: number) => number, noise: number) => f.map((v, i) => ({ f: v, signal: transfer(v) ** 2 * v ** -3, noise, transfer: transfer(v), count: 2 * i + 1 }))
  it('are one where nothing is lost, and undo a blur that wavelets can form', () => {
    fittingGains(known(() => 1, 0), 5).forEach(gain => expect(gain).toBeCloseTo(1, 2))
    const gains = [1, 2.5, 2, 1.4, 1.1]
    // The inverse of a filter of these gains, along an axis; on a diagonal it is a little different.
    const blur = (v: number) => 1 / scaleTransfers(v, 0, 5).reduce((sum, r, j) => sum + (gains[j]! - 1) * r, 1)
    fittingGains(known(blur, 0), 5).forEach((gain, j) => expect(Math.abs(gain - gains[j]!)).toBeLessThan(0.3))
  })
  it('fall to nothing where there is only noise', () => {
    const gains = fittingGains(known(v => (v < 0.12 ? 0.6 : 0.5), 1e6), 5)
    expect(gains[0]!).toBeLessThan(0.3)
  })
})

describe('spectra of halves', () => {
  it('tell signal from noise', () => {
    const n = 128
    const scene = gaussianNoise(1)
    const common = Float32Array.from({ length: n * n }, () => 3 * scene())
    const half = (seed: number) => {
      const random = gaussianNoise(seed)
      return common.map(v => v + 4 * random())
    }
    const spectra = radialSpectra(half(2), half(3), n, n)
    // The mean of both has 9 of signal and 16 / 2 of noise.
    let mean = 0
    let bins = 0
    for (let i = 4; i < spectra.signal.length; i++) { mean += signalShare(spectra, i); bins++ }
    expect(Math.abs(mean / bins - 9 / 17)).toBeLessThan(0.04)
  })
})
