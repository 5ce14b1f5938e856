import { describe, expect, it } from 'vitest'
import { createRandom } from '../../workers/rehearse/random'
import { createSquareTransform } from '../../workers/rehearse/fft2'
import { createPsfMaker, createPupil, psfPeak } from '../../workers/rehearse/pupil'
import { skyToPixels } from '../../workers/rehearse/scene'
import { createSimulator } from '../../workers/rehearse/simulator'
import { rehearsalReader } from '../../workers/rehearse/reader'
import { demoScenes } from '../../workers/rehearse/demos'
import { pixelScaleArcsec, rehearsalSpecSchema, type RehearsalSpec } from '../../workers/rehearse/spec'

const small: RehearsalSpec = { ...demoScenes.double, width: 48, height: 40, frames: 9 }

function moments(values: number[]) {
  const mean = values.reduce((sum, value) => sum + value, 0) / values.length
  return { mean, variance: values.reduce((sum, value) => sum + (value - mean) ** 2, 0) / values.length }
}

describe('random numbers', () => {
  it('have the moments of their distributions', () => {
    const random = createRandom(7)
    const count = 40_000
    const normal = moments(Array.from({ length: count }, () => random.normal()))
    expect(Math.abs(normal.mean)).toBeLessThan(0.02)
    expect(normal.variance).toBeCloseTo(1, 1)
    for (const mean of [0.3, 6, 39, 41, 900]) {
      const counts = moments(Array.from({ length: count }, () => random.poisson(mean)))
      // Mean and variance of a Poisson distribution are equal; five standard errors.
      expect(Math.abs(counts.mean - mean)).toBeLessThan(5 * Math.sqrt(mean / count))
      expect(Math.abs(counts.variance / mean - 1)).toBeLessThan(5 * Math.sqrt((2 + 1 / mean) / count))
    }
  })

  it('differ between streams and repeat for one', () => {
    const take = (...key: [number, number, number]) => Array.from({ length: 4 }, createRandom(...key).uniform)
    expect(take(1, 2, 3)).toEqual(take(1, 2, 3))
    expect(take(1, 2, 3)).not.toEqual(take(1, 2, 4))
    expect(take(1, 2, 3)).not.toEqual(take(1, 3, 3))
    expect(take(1, 2, 3)).not.toEqual(take(2, 2, 3))
  })
})

describe('the aperture', () => {
  it('gives the Airy pattern: first zero at 1.21967 λ/D, second ring 1.75 % of the peak (Born & Wolf, section 8.5.2)', () => {
    const size = 256
    const pupil = createPupil(size, 32, 0)
    const psf = new Float64Array(size * size)
    createPsfMaker(pupil).add(new Float64Array(pupil.x.length), 1 / (pupil.power * size * size), psf)
    expect(psf.reduce((sum, value) => sum + value, 0)).toBeCloseTo(1, 10)
    expect(psf[0]).toBeCloseTo(pupil.peak, 12)
    // One λ/D is eight pixels here.
    const radial = Array.from(psf.subarray(0, 24))
    const zero = radial.indexOf(Math.min(...radial.slice(0, 14)))
    expect(zero / 8).toBeGreaterThan(1.1)
    expect(zero / 8).toBeLessThan(1.34)
    expect(Math.max(...radial.slice(zero)) / pupil.peak).toBeCloseTo(0.0175, 3)
  })

  it('moves the image by what the slope of the phase says', () => {
    const size = 128
    const pupil = createPupil(size, 30, 0.3)
    const psf = new Float64Array(size * size)
    const phase = Float64Array.from(pupil.x, (x, i) => 2 * Math.PI / size * (3.3 * x - 5.6 * pupil.y[i]!))
    createPsfMaker(pupil).add(phase, 1, psf)
    const peak = psfPeak(psf, size)
    expect(peak.x).toBeCloseTo(3.3, 1)
    expect(peak.y).toBeCloseTo(-5.6, 1)
  })
})

describe('transforms', () => {
  it('come back to where they started and agree with the definition at one frequency', () => {
    const random = createRandom(3)
    const size = 16
    const data = Float64Array.from({ length: 2 * size * size }, () => random.normal())
    const copy = Float64Array.from(data)
    const transform = createSquareTransform(size)
    transform.forward(copy)
    let re = 0
    for (let y = 0; y < size; y++) {
      for (let x = 0; x < size; x++) {
        const angle = -2 * Math.PI * (3 * x + 5 * y) / size
        const at = 2 * (y * size + x)
        re += data[at]! * Math.cos(angle) - data[at + 1]! * Math.sin(angle)
      }
    }
    expect(copy[2 * (5 * size + 3)]).toBeCloseTo(re, 9)
    // Only what is asked for: five rows across the end, with the full band.
    const part = Float64Array.from(copy)
    transform.inverse(part, { start: 13, count: 5 })
    for (const row of [13, 15, 0, 1]) for (let i = 0; i < 2 * size; i++) expect(part[2 * size * row + i]).toBeCloseTo(data[2 * size * row + i]!, 12)
    transform.inverse(copy)
    for (let i = 0; i < data.length; i++) expect(copy[i]).toBeCloseTo(data[i]!, 12)
  })
})

describe('a rehearsal', () => {
  it('puts north up and east left at position angle 0 of screen up, and turns with it', () => {
    // Position angle from north through east; with north up and east left, 90° is to the left (the trade's convention).
    expect(skyToPixels(1, 0, 0, 0.1).dy).toBeCloseTo(-10)
    expect(skyToPixels(1, 90, 0, 0.1).dx).toBeCloseTo(-10)
    expect(skyToPixels(1, 90, 90, 0.1).dy).toBeCloseTo(-10)
  })

  it('places both stars of a pair where separation and position angle say, in still air', () => {
    const spec: RehearsalSpec = {
      ...small, width: 64, height: 64, frames: 1, air: { ...small.air, apertureOverR0: 0 },
      motion: { ...small.motion, startX: 0.3, startY: -0.4, shakePx: 0, periodicPx: 0 },
      scene: { kind: 'stars', fluxElectrons: 4e6, stars: [{ separationArcsec: 0, positionAngleDeg: 0, deltaMag: 0 }, { separationArcsec: 2, positionAngleDeg: 135, deltaMag: 1 }] },
      detector: { ...small.detector, hotPixels: 0, gain: 0.2, bias: 100 },
    }
    const simulator = createSimulator(spec)
    const frame = new Uint16Array(64 * 64)
    const truth = simulator.render(0, frame, 0)
    expect(truth.strehl).toBeCloseTo(1, 2)
    const scale = pixelScaleArcsec(spec.optics)
    const centroid = (x: number, y: number) => {
      let sum = 0, sumX = 0, sumY = 0
      for (let j = -3; j <= 3; j++) {
        for (let i = -3; i <= 3; i++) {
          const column = Math.round(x) + i, row = Math.round(y) + j
          const value = Math.max(0, frame[row * 64 + column]! - 100)
          sum += value
          sumX += value * column
          sumY += value * row
        }
      }
      return { x: sumX / sum, y: sumY / sum, sum }
    }
    const first = centroid(truth.placeX, truth.placeY)
    // South-east: left and down.
    const side = 2 / scale * Math.SQRT1_2
    const second = centroid(truth.placeX - side, truth.placeY + side)
    expect(first.x).toBeCloseTo(32.3, 0)
    expect(second.x - first.x).toBeCloseTo(-side, 0)
    expect(second.y - first.y).toBeCloseTo(side, 0)
    expect(-2.5 * Math.log10(second.sum / first.sum)).toBeCloseTo(1, 1)
  })

  it('tells the truth about the brightest speckle, also where the detector undersamples', () => {
    for (const pixelSizeUm of [2.9, 7, 10]) {
      const spec: RehearsalSpec = {
        ...small, width: 64, height: 64, frames: 6, subSteps: 1, dropShare: 0, air: { ...small.air, apertureOverR0: 2 }, optics: { ...small.optics, pixelSizeUm },
        scene: { kind: 'stars', fluxElectrons: 1e6, stars: [{ separationArcsec: 0, positionAngleDeg: 0, deltaMag: 0 }] },
        detector: { ...small.detector, hotPixels: 0, gain: 0.5, bias: 100 },
      }
      const simulator = createSimulator(spec)
      const frame = new Uint16Array(64 * 64)
      for (let i = 0; i < 6; i++) {
        const truth = simulator.render(i, frame, 0)
        const best = frame.indexOf(frame.reduce((a, b) => Math.max(a, b), 0))
        expect(Math.abs(best % 64 - truth.placeX - truth.psfPeakX)).toBeLessThan(1)
        expect(Math.abs(Math.floor(best / 64) - truth.placeY - truth.psfPeakY)).toBeLessThan(1)
        expect(truth.strehl).toBeGreaterThan(0.02)
        expect(truth.strehl).toBeLessThan(1)
      }
    }
  })

  it('gives the planet its colours through a mosaic and keeps the sky dark', () => {
    const spec: RehearsalSpec = { ...demoScenes.planet, frames: 1, motion: { ...small.motion, startX: 0, startY: 0 }, detector: { ...demoScenes.planet.detector, hotPixels: 0 } }
    const frame = new Uint8Array(160 * 160)
    createSimulator(spec).render(0, frame, 0)
    const mean = (x: number, y: number) => {
      let sum = 0
      for (let j = 0; j < 20; j += 2) for (let i = 0; i < 20; i += 2) sum += frame[(70 + j + y) * 160 + 70 + i + x]!
      return sum / 100
    }
    // The clouds are cream: red over green over blue (RGGB).
    expect(mean(0, 0)).toBeGreaterThan(mean(1, 0))
    expect(mean(0, 1)).toBeGreaterThan(mean(1, 1))
    expect(frame[3 * 160 + 3]).toBeLessThan(20)
  })

  it('is the same for any order and block size', async () => {
    const whole = await (await rehearsalReader(small)).readFrames(0, 9)
    const reader = await rehearsalReader(small)
    const pixels = 48 * 40
    for (const [first, count] of [[5, 3], [8, 1], [0, 2], [2, 1], [3, 2]] as const) {
      const block = await reader.readFrames(first, count)
      expect(block.samples).toEqual(whole.samples.subarray(first * pixels, (first + count) * pixels))
    }
    const other = await (await rehearsalReader({ ...small, seed: small.seed + 1 })).readFrames(0, 9)
    expect(other.samples).not.toEqual(whole.samples)
  })

  it('says what it is and refuses frames that it does not have', async () => {
    const reader = await rehearsalReader({ ...small, dropShare: 0.3, frames: 60 })
    expect(reader.facts).toMatchObject({ format: 'rehearsal', width: 48, height: 40, frameCount: 60, bitDepth: 16 })
    expect(reader.facts.times.droppedFrames).toBeGreaterThan(5)
    expect(Math.round(reader.seconds![59]! / 0.012)).toBe(59 + reader.facts.times.droppedFrames)
    await expect(reader.readFrames(59, 2)).rejects.toThrow(RangeError)
    const stop = new AbortController()
    stop.abort()
    await expect(reader.readFrames(0, 1, stop.signal)).rejects.toThrow()
    reader.close()
  })

  it('has demo specs that are valid', () => {
    for (const spec of Object.values(demoScenes)) expect(rehearsalSpecSchema.safeParse(spec).success).toBe(true)
  })
})
