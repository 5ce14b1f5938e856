/** Wiener and Richardson-Lucy against published and independently computed values. */
import { describe, expect, it } from 'vitest'
import { airyIntensity } from '../../shared/optics'
import { createConvolver, inSquares } from '../../workers/restore/convolve'
import { filterPlane, lucyPlane, richardsonLucy, wienerCurve, wienerFactor } from '../../workers/restore/deconvolve'
import { againstTelescope, besselJ0, coreAndHalo, diffractionTransfer, profileTransfer, radialProfile } from '../../workers/restore/psf'
import { gaussianNoise } from './support/noise'

const noPause = () => Promise.resolve()

describe('Richardson-Lucy', () => {
  it('gives the worked example: circular, h = [¼ ½ ¼], d = (0,0,0,1,2,1,0,0), flat start', async () => {
    // Rows all alike, so that the two-dimensional iteration is the one-dimensional one: a transfer of ½ + ½ cos 2πfx along x
    // alone. (Computed independently from Richardson 1972 and Lucy 1974.)
    const n = 8
    const d = [0, 0, 0, 1, 2, 1, 0, 0]
    const data = Float32Array.from({ length: n * n }, (_, i) => d[i % n]!)
    const along = { n, apply: (window: Float32Array, out: Float32Array) => { for (let i = 0; i < n * n; i++) out[i] = 0.5 * window[i]! + 0.25 * (window[i - i % n + (i + 1) % n]! + window[i - i % n + (i + n - 1) % n]!) } }
    const after = async (rounds: number) => {
      const u = new Float32Array(n * n).fill(0.5)
      await richardsonLucy(data, u, along, rounds, 0, noPause)
      return [...u.subarray(0, n)]
    }
    const close = (found: number[], known: number[]) => known.forEach((value, i) => expect(found[i]).toBeCloseTo(value, 4))
    close(await after(1), [0, 0, 0.25, 1, 1.5, 1, 0.25, 0])
    close(await after(2), [0, 0, 0.06667, 0.93333, 2, 0.93333, 0.06667, 0])
    const ten = await after(10)
    expect(ten[4]).toBeCloseTo(3.7137, 3)
    expect(ten.reduce((sum, v) => sum + v, 0)).toBeCloseTo(4, 4)
    expect((await after(100))[4]).toBeCloseTo(4, 3)
  })

  it('ends at the noise, and goes on to the count where it is told so', async () => {
    const n = 96
    const random = gaussianNoise(5)
    const transfer = coreAndHalo(0.4, 9)
    const curve = { step: 1 / 128, values: Array.from({ length: 92 }, (_, i) => transfer(i / 128)) }
    const scene = Float32Array.from({ length: n * n }, (_, i) => ((i % n) - 48) ** 2 + (Math.floor(i / n) - 48) ** 2 < 900 ? 1000 : 0)
    const seen = (await filterPlane(scene, n, n, curve, noPause)).map(v => v + 100 + 8 * random())
    const plan = { transfer: curve, iterations: 60, floor: 100, noise: 8 }
    const stopped = await lucyPlane(seen, n, n, plan, noPause)
    expect(stopped.rounds).toBeGreaterThan(0)
    expect(stopped.rounds).toBeLessThan(40)
    const error = (image: Float32Array) => Math.sqrt(image.reduce((sum, v, i) => sum + (v - 100 - scene[i]!) ** 2, 0) / image.length)
    expect(error(stopped.samples)).toBeLessThan(0.6 * error(seen))
    const all = await lucyPlane(seen, n, n, { ...plan, noise: 0 }, noPause)
    expect(all.rounds).toBe(60)
    // Beside a bright disc the dark sky must not run away, however long it goes on.
    expect(Math.max(...all.samples)).toBeLessThan(2000)
    expect(Math.min(...all.samples)).toBeGreaterThan(0)
  })
})

describe('Wiener', () => {
  it('has the factor of the worked example: H = 0.5, SNR (power) = 10', () => {
    expect(wienerFactor(0.5, 10)).toBeCloseTo(1.42857, 5)
  })
  it('leaves the mean, and undoes a blur without noise', async () => {
    const n = 80
    const transfer = coreAndHalo(0.5, 8)
    const blur = { step: 1 / 256, values: Array.from({ length: 182 }, (_, i) => transfer(i / 256)) }
    const scene = Float32Array.from({ length: n * n }, (_, i) => 50 + 20 * Math.cos(0.5 * (i % n)) * Math.cos(0.3 * Math.floor(i / n)))
    const seen = await filterPlane(scene, n, n, blur, noPause)
    const back = await filterPlane(seen, n, n, wienerCurve(transfer, null, 1e6), noPause)
    for (let y = 20; y < 60; y++) for (let x = 20; x < 60; x++) expect(Math.abs(back[y * n + x]! - scene[y * n + x]!)).toBeLessThan(0.5)
  })
})

describe('squares', () => {
  it('show no seam in an image larger than one', async () => {
    const width = 1500
    const height = 40
    const image = Float32Array.from({ length: width * height }, (_, i) => 100 + 30 * Math.sin(0.02 * (i % width)))
    const transfer = coreAndHalo(0.6, 12)
    const curve = { step: 1 / 128, values: Array.from({ length: 92 }, (_, i) => transfer(i / 128)) }
    const out = await filterPlane(image, width, height, curve, noPause)
    let steepest = 0
    for (let x = 1; x < width; x++) steepest = Math.max(steepest, Math.abs(out[20 * width + x]! - out[20 * width + x - 1]!))
    expect(steepest).toBeLessThan(0.62)
  })
  it('give back the image where nothing is done', async () => {
    const image = Float32Array.from({ length: 1300 * 30 }, (_, i) => i % 977)
    const out = await inSquares(image, 1300, 30, () => Promise.resolve(), noPause)
    out.forEach((value, i) => { if (Math.abs(value - image[i]!) > 1e-3) throw new Error(`pixel ${i}: ${value}`) })
  })
  it('work cyclically as a convolver', () => {
    const blur = createConvolver(16, { step: 0.5, values: [1, 1, 1] })
    const window = Float32Array.from({ length: 256 }, (_, i) => Math.cos(2 * Math.PI * 3 * (i % 16) / 16))
    const out = new Float32Array(256)
    blur.apply(window, out)
    out.forEach((value, i) => expect(value).toBeCloseTo(window[i]!, 5))
  })
})

describe('transfers of telescopes and stars', () => {
  it('of a circle: 2/π (acos u − u √(1 − u²)), Goodman ch. 6', () => {
    for (const u of [0, 0.1, 0.35, 0.5, 0.8, 1]) expect(diffractionTransfer(u, 0)).toBeCloseTo(2 / Math.PI * (Math.acos(u) - u * Math.sqrt(1 - u * u)), 9)
  })
  it('of a ring: the Hankel transform of its image', () => {
    // ∫ I(v) J0(2πfr) r dr numerically to 60 λ/D; what lies beyond is below 1 % of the light.
    for (const u of [0.15, 0.5, 0.75]) {
      let sum = 0
      let all = 0
      for (let r = 0.005; r < 60; r += 0.01) {
        const i = airyIntensity(Math.PI * r, 0.3) * r
        sum += i * besselJ0(2 * Math.PI * u * r)
        all += i
      }
      expect(Math.abs(sum / all - diffractionTransfer(u, 0.3))).toBeLessThan(0.02)
    }
  })
  it('J0 at known places (Abramowitz & Stegun, table 9.1)', () => {
    expect(besselJ0(0)).toBeCloseTo(1, 12)
    expect(besselJ0(1)).toBeCloseTo(0.7651976866, 9)
    expect(besselJ0(2.404825558)).toBeCloseTo(0, 8)
    expect(besselJ0(10)).toBeCloseTo(-0.2459357645, 9)
  })
  it('measured on a Gaussian star is a Gaussian, companion or not', () => {
    const n = 96
    const sigma = 2.5
    const star = (x: number, y: number) => (i: number) => 1000 * Math.exp(-(((i % n) - x) ** 2 + (Math.floor(i / n) - y) ** 2) / (2 * sigma * sigma))
    const a = star(48, 48)
    const b = star(61, 52)
    for (const image of [Float32Array.from({ length: n * n }, (_, i) => 20 + a(i)), Float32Array.from({ length: n * n }, (_, i) => 20 + a(i) + 0.7 * b(i))]) {
      const { step, values } = profileTransfer(radialProfile(image, n, n, 48, 48, 20, 30))
      for (const k of [2, 6, 12]) expect(Math.abs(values[k]! - Math.exp(-2 * (Math.PI * sigma * k * step) ** 2))).toBeLessThan(0.05)
    }
  })
  it('over the telescope\'s own is what the air added', () => {
    const optics = { apertureMm: 250, focalLengthMm: 5500, pixelSizeUm: 2.9, obstruction: 0.2, wavelengthNm: 550 }
    const lambda = 0.55 * 22 / 2.9
    const air = coreAndHalo(0.4, 20)
    const measured = { step: 1 / 128, values: Array.from({ length: 92 }, (_, i) => air(i / 128) * diffractionTransfer(i / 128 * lambda, 0.2) * (i ? Math.sin(Math.PI * i / 128) / (Math.PI * i / 128) : 1)) }
    const found = againstTelescope(measured, optics)
    for (const i of [0, 3, 8, 20]) expect(Math.abs(found.values[i]! - air(i / 128))).toBeLessThan(0.01)
  })
})
