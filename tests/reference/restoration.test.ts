/** Deconvolution against scikit-image, wavelets against SciPy, both from Debian's packages. */
import { fileURLToPath } from 'node:url'
import { describe, expect, it } from 'vitest'
import { decompose } from '../../workers/restore/atrous'
import { createConvolver } from '../../workers/restore/convolve'
import { richardsonLucy, wienerFactor } from '../../workers/restore/deconvolve'
import { runPython } from './lib/debian'

const n = 128
const sigma = 1.2
const rounds = 4
const snr = 40
const scales = 4

/** A few soft spots and edges over a level, 0-1. */
const image = Float32Array.from({ length: n * n }, (_, i) => {
  const x = i % n
  const y = Math.floor(i / n)
  const spot = (cx: number, cy: number, s: number) => Math.exp(-((x - cx) ** 2 + (y - cy) ** 2) / (2 * s * s))
  return 0.2 + 0.3 * spot(60, 66, 3) + 0.25 * spot(70, 58, 6) + (x > 52 && x < 80 && y > 75 ? 0.15 : 0) + 0.04 * Math.sin(0.9 * x) * Math.cos(0.7 * y)
})
const answer = runPython(fileURLToPath(new URL('restoration.py', import.meta.url)), JSON.stringify({ n, sigma, rounds, snr, scales, image: [...image] }))
const known = answer.output === null ? null : JSON.parse(answer.output) as { lucy: number[], wiener: number[], planes: number[][] }

const gaussian = (f: number) => Math.exp(-2 * (Math.PI * sigma * f) ** 2)
const curve = (of: (f: number) => number) => ({ step: 1 / 512, values: Array.from({ length: 364 }, (_, i) => of(i / 512)) })

describe.skipIf(known === null)(`restoration beside scikit-image and SciPy${answer.missing ? ` (${answer.missing})` : ''}`, () => {
  it('Richardson-Lucy from the same flat start', async () => {
    const u = new Float32Array(n * n).fill(0.5)
    await richardsonLucy(image, u, createConvolver(n, curve(gaussian)), rounds, 0, () => Promise.resolve())
    // There the image ends in nothing, here it goes round: compared where neither reaches, 2 × 5 px a round from the edge.
    let worst = 0
    for (let y = 42; y < n - 42; y++) for (let x = 42; x < n - 42; x++) worst = Math.max(worst, Math.abs(u[y * n + x]! - known!.lucy[y * n + x]!))
    expect(worst).toBeLessThan(2e-3)
    expect(Math.max(...u.map((v, i) => Math.abs(v - image[i]!)))).toBeGreaterThan(0.03)
  })
  it('Wiener with a constant ratio of signal to noise', () => {
    const out = new Float32Array(n * n)
    createConvolver(n, curve(f => wienerFactor(gaussian(f), snr))).apply(image, out)
    let worst = 0
    // The one Nyquist row and column are left out here: at the edge of the band the filter passes next to nothing.
    out.forEach((value, i) => { worst = Math.max(worst, Math.abs(value - known!.wiener[i]!)) })
    expect(worst).toBeLessThan(3e-3)
  })
  it('à trous planes, mirrored at the edges', () => {
    const { details } = decompose(image, n, n, scales)
    details.forEach((plane, j) => plane.forEach((value, i) => { if (Math.abs(value - known!.planes[j]![i]!) > 1e-5) throw new Error(`scale ${j}, pixel ${i}: ${value}, SciPy has ${known!.planes[j]![i]}`) }))
  })
})
