/** Scale and orientation from a drift. */
import { describe, expect, it } from 'vitest'
import { angleDifference, driftRate } from '../../../shared/astro/angles'
import { combineDrifts, driftsMissing } from '../../../shared/astro/drift'
import { calibrateDrift, DriftError, fitTrack, type DriftTrack } from '../../../workers/measure/drift/index'
import { fitStraight } from '../../../workers/measure/drift/straight'
import { rehearsalReader } from '../../../workers/rehearse/index'
import { demoScene } from '../../../workers/rehearse/demos'
import type { RehearsalSpec } from '../../../workers/rehearse/spec'
import { uniformFrom } from '../support/moving-double'

function normals(seed: number): () => number {
  const uniform = uniformFrom(seed)
  return () => Math.sqrt(-2 * Math.log(1 - uniform())) * Math.cos(2 * Math.PI * uniform())
}

function track(seconds: number[], x: (t: number, k: number) => number, y: (t: number, k: number) => number): DriftTrack {
  return { frame: Int32Array.from(seconds, (_, k) => k), seconds: Float64Array.from(seconds), x: Float64Array.from(seconds, x), y: Float64Array.from(seconds, y), halfWidthPx: 2, without: 0 }
}

describe('a straight track', () => {
  // Worked example: (100, 200) → (612, 230), y up, in 10.00 s at declination +30°: scale 0.253977″/px, west at +3.3533°.
  // The rate is 360·3600/86164.0905 = 15.04107″ a sidereal second (IAU), times the cosine of the declination.
  it('gives the scale and the direction of the worked example', () => {
    const seconds = Array.from({ length: 101 }, (_, k) => k / 10)
    const fit = fitTrack(track(seconds, t => 100 + 51.2 * t, t => 400 - 200 - 3 * t))
    expect(driftRate(30) / fit.speed).toBeCloseTo(0.253977, 6)
    expect(fit.directionDeg).toBeCloseTo(3.3533, 4)
    expect(fit.lengthPx).toBeCloseTo(512.878, 3)
  })

  it('uses the times of the frames, not their numbers', () => {
    const seconds = Array.from({ length: 100 }, (_, k) => 0.04 * k + (k > 30 ? 0.4 : 0) + (k > 70 ? 0.25 : 0))
    const fit = fitTrack(track(seconds, t => 10 + 20 * t, t => 50 + 5 * t))
    expect(fit.speed).toBeCloseTo(Math.hypot(20, 5), 6)
  })

  it('leaves out places that are far off, and says how many', () => {
    const normal = normals(4)
    const seconds = Array.from({ length: 120 }, (_, k) => 0.04 * k)
    const fit = fitTrack(track(seconds, (t, k) => 10 + 20 * t + 0.1 * normal() + (k % 40 === 7 ? 30 : 0), t => 50 + 5 * t + 0.1 * normal()))
    expect(fit.leftOut).toBe(3)
    expect(Math.abs(fit.speed - Math.hypot(20, 5))).toBeLessThan(4 * fit.speedErr)
  })
})

describe('the error of a slope', () => {
  const seconds = Float64Array.from({ length: 60 }, (_, k) => 0.04 * k)
  const ones = new Float64Array(60).fill(1)
  const trials = (seed: number, noise: (normal: () => number) => Float64Array) => {
    const normal = normals(seed)
    let inside = 0
    let squares = 0
    const errors: number[] = []
    for (let trial = 0; trial < 100; trial++) {
      const { slope, slopeVariance } = fitStraight(seconds, noise(normal), noise(normal), ones)
      for (const axis of [0, 1] as const) {
        const pull = slope[axis] / Math.sqrt(slopeVariance[axis])
        if (Math.abs(pull) < 1) inside++
        squares += pull * pull
        errors.push(Math.sqrt(slopeVariance[axis]))
      }
    }
    return { inside: inside / 200, rms: Math.sqrt(squares / 200), error: errors.sort((a, b) => a - b)[100]! }
  }

  it('is never below that of independent errors where they are independent', () => {
    const found = trials(11, normal => Float64Array.from(seconds, () => normal()))
    // Textbook error of a slope: σ / √Σ(t − t̄)², here with σ = 1.
    const middle = seconds.reduce((sum, t) => sum + t, 0) / 60
    const textbook = 1 / Math.sqrt(seconds.reduce((sum, t) => sum + (t - middle) ** 2, 0))
    expect(found.error / textbook).toBeGreaterThan(0.9)
    expect(found.inside).toBeGreaterThan(0.6)
  })

  it('is met in two thirds of the cases where the errors hang together (first-order autoregression)', () => {
    const found = trials(12, (normal) => {
      let value = normal()
      return Float64Array.from(seconds, () => (value = 0.8 * value + 0.6 * normal()))
    })
    // 200 trials: 0.683 with a standard error of 0.033. Larger is harmless, smaller is not.
    expect(found.inside).toBeGreaterThan(0.58)
    expect(found.rms).toBeLessThan(1.25)
  })
})

function driftSpec(seed: number, declinationDeg: number, upDeg: number): { spec: RehearsalSpec, scale: number, westDeg: number } {
  const scale = 0.33
  const pixelSizeUm = 2.9
  const rate = driftRate(declinationDeg) / scale
  // West has position angle 270°; screen up has upDeg, and angles grow counter-clockwise.
  const west = (270 - upDeg) * Math.PI / 180
  const [vx, vy] = [-rate * Math.sin(west), -rate * Math.cos(west)]
  const frames = 120
  const half = frames * 0.04 / 2
  const base = demoScene('double')
  return {
    scale, westDeg: Math.atan2(-vy, vx) * 180 / Math.PI,
    spec: {
      ...base, name: 'drift', seed, width: 192, height: 128, frames, exposureMs: 8, intervalMs: 40, subSteps: 2, dropShare: 0.02, upDeg,
      optics: { apertureMm: 200, focalLengthMm: 206.264806 * pixelSizeUm / scale, pixelSizeUm, obstruction: 0.2, wavelengthNm: 550 },
      air: { apertureOverR0: 3, outerScaleM: 25, layers: [{ share: 0.6, speedMPerS: 5, directionDeg: 0 }, { share: 0.4, speedMPerS: 9, directionDeg: 60 }], gusts: { amplitude: 0, periodS: 5 } },
      scene: { kind: 'stars', stars: [{ separationArcsec: 0, positionAngleDeg: 0, deltaMag: 0 }], fluxElectrons: 9000 },
      motion: { startX: -vx * half, startY: -vy * half, rateXPxPerS: vx, rateYPxPerS: vy, periodicPx: 0, periodS: 10, shakePx: 0, jumps: [] },
      cloud: null, detector: { bitDepth: 8, gain: 0.12, bias: 8, readNoise: 2, skyElectrons: 1, hotPixels: 6, hotElectrons: [100, 600], mosaic: 'none' },
    },
  }
}

describe('a simulated drift capture', () => {
  it('is measured within its errors, through gaps and hot pixels', async () => {
    const pulls: number[] = []
    for (const [seed, declination, up] of [[1, 40, 12], [2, 55, 200]] as const) {
      const { spec, scale, westDeg } = driftSpec(seed, declination, up)
      const found = await calibrateDrift(await rehearsalReader(spec), declination)
      pulls.push((found.scaleArcsecPerPx - scale) / found.scaleErr, angleDifference(found.westDirectionDeg, westDeg) / found.angleErr)
      expect(found.scaleErr / scale).toBeLessThan(0.02)
      expect(found.angleErr).toBeLessThan(1.2)
      expect(found.framesUsed).toBeGreaterThan(90)
    }
    for (const pull of pulls) expect(Math.abs(pull)).toBeLessThan(3)
  }, 60_000)

  it('is refused with a reason where it cannot be one', async () => {
    const { spec } = driftSpec(1, 40, 12)
    const still = { ...spec, motion: { ...spec.motion, startX: 0, startY: 0, rateXPxPerS: 0, rateYPxPerS: 0 }, frames: 40 }
    await expect(calibrateDrift(await rehearsalReader(still), 40)).rejects.toThrow(DriftError)
    const blank = { ...spec, scene: { kind: 'blank' as const }, frames: 40 }
    await expect(calibrateDrift(await rehearsalReader(blank), 40)).rejects.toThrow(/star/)
    await expect(calibrateDrift({ ...await rehearsalReader(spec), seconds: null }, 40)).rejects.toThrow(/no times/)
    await expect(calibrateDrift(await rehearsalReader(spec), 90)).rejects.toThrow(/pole/)
  }, 60_000)
})

describe('several drifts', () => {
  const drift = (scaleArcsecPerPx: number, scaleErr: number, westDirectionDeg: number, angleErr: number) => ({ scaleArcsecPerPx, scaleErr, westDirectionDeg, angleErr })
  it('are averaged by their weights, across 0°, and their scatter widens the error', () => {
    const same = combineDrifts([drift(0.3, 0.002, 359.9, 0.3), drift(0.302, 0.002, 0.1, 0.3)])
    expect(same.scaleArcsecPerPx).toBeCloseTo(0.301, 12)
    expect(same.scaleErr).toBeCloseTo(0.002 / Math.SQRT2, 12)
    expect(angleDifference(same.westDirectionDeg, 0)).toBeCloseTo(0, 9)
    const apart = combineDrifts([drift(0.3, 0.001, 10, 0.3), drift(0.306, 0.001, 10, 0.3)])
    // χ² = 18 at one degree of freedom: the error of the mean, 0.001/√2, grows by √18 to half the difference.
    expect(apart.scatter.scale).toBeCloseTo(18, 9)
    expect(apart.scaleErr).toBeCloseTo(0.003, 12)
  })
  it('are counted that are missing for a wanted error', () => {
    expect(driftsMissing(1, 0.6, 0.3)).toBe(3)
    expect(driftsMissing(4, 0.3, 0.3)).toBe(0)
    expect(driftsMissing(2, 0.5, 0.2)).toBe(11)
  })
})
