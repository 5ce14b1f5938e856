import { describe, expect, it } from 'vitest'
import { doubtful, evidenceWords, keepRange } from '../../shared/evidence'
import type { Evidence } from '../../shared/schemas/evidence'
import { defaultRecipe } from '../../shared/schemas/recipe'
import { demoScene, rehearsalReader, type RehearsalSpec } from '../../workers/rehearse/index'
import { Engine } from '../../workers/run/engine'
import { chessHalf, rankCorrelation } from '../../workers/run/evidence/confirm'
import { InlinePool } from '../../workers/run/pool'

const double = demoScene('double')
async function evidence(spec: Partial<RehearsalSpec>): Promise<Evidence> {
  const engine = new Engine(await rehearsalReader({ ...double, width: 64, height: 64, frames: 320, cloud: null, motion: { ...double.motion, startX: 0, startY: 0, rateXPxPerS: 0, rateYPxPerS: 0 }, ...spec }), { pool: new InlinePool(), budgetBytes: 2 ** 27 })
  await engine.run(defaultRecipe, double.optics, () => undefined, new AbortController().signal)
  const found = await engine.evidence()
  engine.close()
  return found
}

describe('frames that confirm each other', () => {
  it('show a star in pixels that registered nothing, and rank alike by halves', async () => {
    const found = await evidence({})
    expect(found.signal).toBe(true)
    expect(found.confirmed!).toBeGreaterThan(0.8)
    expect(found.reliability!).toBeGreaterThan(0.8)
    expect(found.measure).toBe('strehl')
    const points = found.points.filter(point => point.sharpnessErr !== null)
    expect(points.length).toBeGreaterThan(5)
    expect(points[0]!.sharpness).toBeGreaterThan(points.at(-1)!.sharpness * 1.2)
    expect(points[0]!.noise).toBeGreaterThan(points.at(-1)!.noise)
  }, 60_000)

  it('show nothing in noise, though alignment draws the reference into it', async () => {
    const found = await evidence({ scene: { kind: 'blank' }, name: 'noise' })
    expect(found.signal).toBe(false)
    // Frames that were not used, aligned on their own noise: alignment on noise, Henderson 2013.
    expect(Math.abs(found.confirmed!)).toBeLessThanOrEqual(0.1)
    expect(found.drawn!).toBeGreaterThan(found.confirmed! + 0.05)
    expect(evidenceWords(found, 0.1).headline).toBe('No signal.')
  }, 60_000)
})

describe('the chessboard', () => {
  it('keeps one colour and fills the other from it alone', () => {
    const frame = Float32Array.from({ length: 25 }, (_, i) => (i % 2 === 0 ? 1 : 9))
    const out = new Float32Array(25)
    chessHalf(frame, 5, 5, 0, out)
    expect([...out]).toEqual(new Array(25).fill(1))
    chessHalf(frame, 5, 5, 1, out)
    expect([...out]).toEqual(new Array(25).fill(9))
  })
  it('ranks with ties as in the textbook: Spearman with mean ranks', () => {
    expect(rankCorrelation([1, 2, 3, 4], [10, 20, 30, 40])).toBeCloseTo(1, 12)
    expect(rankCorrelation([1, 2, 3, 4], [4, 3, 2, 1])).toBeCloseTo(-1, 12)
    // Ranks 1.5 1.5 3 4 and 1 2 3 4: covariance 4.5, variances 4.5 and 5.
    expect(rankCorrelation([5, 5, 6, 7], [1, 2, 3, 4])).toBeCloseTo(4.5 / Math.sqrt(22.5), 12)
  })
})

describe('the recommended range', () => {
  const point = (count: number, sharpness: number, noise: number) => ({ count, fraction: count / 1000, sharpness, sharpnessErr: 0.002, finer: null, finerErr: null, noise, reachPx: null })
  const curve = (noise: (count: number) => number): Evidence => ({
    measure: 'strehl', frequencies: null, absolute: true, signal: true, confirmed: 0.9, drawn: 0.9, reliability: 0.9,
    points: [2, 10, 20, 50, 100, 200, 500, 1000].map(count => point(count, 0.55 - 0.1 * Math.log10(count / 2), noise(count))),
  })
  it('moves to more frames where noise is worse, and never rests on a handful', () => {
    const quiet = keepRange(curve(count => 0.01 / Math.sqrt(count)))!
    const loud = keepRange(curve(count => 0.6 / Math.sqrt(count)))!
    expect(quiet.from.count).toBe(10)
    expect(loud.best.count).toBeGreaterThan(quiet.best.count)
    expect(evidenceWords(curve(count => 0.6 / Math.sqrt(count)), 0.01).text).toContain('Below, chance decides')
  })
  it('says so when noise dominates the score', () => {
    const doubt = { ...curve(() => 0.01), reliability: 0.2 }
    expect(doubtful(doubt)).toBe(true)
    expect(evidenceWords(doubt, 0.01).text).toContain('Noise dominates the score')
    expect(evidenceWords({ ...doubt, points: [] }, 0.1).headline).toContain('Too few')
  })
})
