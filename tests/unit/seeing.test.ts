import { describe, expect, it } from 'vitest'
import { airyFwhmArcsec, dawesArcsec, lambdaOverDArcsec, nyquistFocalRatio, plateScale, rayleighArcsec, sparrowArcsec, strehlOfPhase } from '../../shared/optics'
import { coherenceTimeMs, friedParameterMm, imageMotionArcsec, isoplanaticAngleArcsec, luckyProbability, scaleFriedParameter, seeingFwhmArcsec } from '../../shared/seeing'

describe('the air', () => {
  it('gives the probabilities that Smith et al. 2009 (arXiv:0906.3041) quote: 1 in 9, 1 in 50, 1 in 3800 at D/r0 = 5, 6, 8', () => {
    // They use Fried's formula, which lies above his own table; a quarter covers the difference.
    for (const [ratio, oneIn] of [[5, 9], [6, 50], [8, 3800]] as const) {
      expect(luckyProbability(ratio) * oneIn).toBeGreaterThan(0.75)
      expect(luckyProbability(ratio) * oneIn).toBeLessThan(1.25)
    }
  })

  it('never gives a probability above 1, and falls as the air gets worse', () => {
    let before = 1
    for (let ratio = 0; ratio < 14; ratio += 0.1) {
      const now = luckyProbability(ratio)
      expect(now).toBeLessThanOrEqual(before)
      before = now
    }
    expect(luckyProbability(0)).toBe(1)
  })

  it('has the published scalings (worked by hand from the formulas)', () => {
    expect(seeingFwhmArcsec(100, 500)).toBeCloseTo(1.0107, 4)
    expect(friedParameterMm(1.0107, 500)).toBeCloseTo(100, 1)
    expect(scaleFriedParameter(100, { wavelengthNm: 500 }, { wavelengthNm: 650 })).toBeCloseTo(137.0, 1)
    expect(scaleFriedParameter(100, { wavelengthNm: 500 }, { wavelengthNm: 800 })).toBeCloseTo(175.8, 1)
    // At 60° from the zenith the seeing is 1.5157 times as wide.
    expect(100 / scaleFriedParameter(100, { wavelengthNm: 500 }, { wavelengthNm: 500, airmass: 2 })).toBeCloseTo(1.5157, 4)
    expect(coherenceTimeMs(100, 10)).toBeCloseTo(3.14, 2)
    expect(() => seeingFwhmArcsec(0, 500)).toThrow(RangeError)
    expect(isoplanaticAngleArcsec(100, 5000)).toBeCloseTo(1.295, 3)
    for (const [aperture, motion] of [[100, 0.440], [200, 0.392], [300, 0.366]] as const) expect(imageMotionArcsec(100, aperture, 500)).toBeCloseTo(motion, 3)
  })
})

describe('the telescope', () => {
  it('has the limits of a 200 mm aperture at 550 nm (worked by hand)', () => {
    expect(lambdaOverDArcsec(200, 550)).toBeCloseTo(0.5672, 4)
    expect(rayleighArcsec(200, 550)).toBeCloseTo(0.6918, 4)
    expect(airyFwhmArcsec(200, 550)).toBeCloseTo(0.5837, 4)
    expect(sparrowArcsec(200, 550)).toBeCloseTo(0.5373, 4)
    expect(dawesArcsec(200)).toBeCloseTo(0.58, 3)
    expect(strehlOfPhase(2 * Math.PI / 14)).toBeCloseTo(0.8176, 4)
  })

  it('is sampled as Nyquist asks', () => {
    expect(plateScale(2.9, 2000)).toBeCloseTo(0.299084, 5)
    expect(nyquistFocalRatio(2.9, 550)).toBeCloseTo(10.55, 2)
    // "Focal ratio five times the pixel in µm" is Nyquist at 400 nm.
    expect(nyquistFocalRatio(2.9, 400)).toBeCloseTo(14.5, 6)
  })
})
