/** Whether the stars of a known field are found without hints, and whether keeping fewer frames resolves them better step by step. */
import { findAndFit } from '../../workers/measure/pair/measure'
import { pixelNoise } from '../../workers/measure/pair/noise'
import { MeasureError } from '../../workers/measure/pair/types'
import type { Engine } from '../../workers/run/engine'
import { keepCount } from '../../shared/schemas/run'
import type { Row } from './rows'
import type { KnownCapture } from './truth'

/** What counts as found, px. */
const NEAR = 1

export async function componentRows(engine: Engine, known: KnownCapture): Promise<Row[]> {
  const { stars } = known
  if (!stars || stars.length < 2) return []
  const state = engine.state!
  const rows: Row[] = []
  const push = (what: string, value: number, digits: number, reference: number | null, source: string) => rows.push({ capture: known.name, what, value, digits, reference, want: reference === null ? 'none' : 'higher', source })
  for (const fraction of [0.01, 0.1, 0.5]) {
    const image = await engine.stack(keepCount(fraction, state.stacker.ranked), false)
    if (image.planes !== 1) return []
    let found = 0
    let faintest = NaN
    try {
      const answer = findAndFit(image, stars.length, pixelNoise(state.figurer.of(image).noise), undefined)
      const components = 'fit' in answer ? answer.fit.components : []
      const first = components[0]
      for (const star of stars) {
        const off = first ? Math.min(...components.map(each => Math.hypot(each.x - first.x - star.dx, each.y - first.y - star.dy))) : Infinity
        if (off < NEAR) found++
        if (star.deltaMag === Math.max(...stars.map(each => each.deltaMag))) faintest = off
      }
    }
    catch (error) {
      if (!(error instanceof MeasureError)) throw error
    }
    push(`stars found blind within ${NEAR} px of the truth, of ${stars.length}, at ${Math.round(100 * fraction)} %`, found, 0, stars.length, 'truth')
    push('  the faintest star is off by, px', faintest, 3, null, '')
  }
  if (stars.length > 2) rows.push(await orderRow(engine, known, stars))
  return rows
}

/**
 * How far the faintest star stands over the middle between it and its neighbours, over the brightest star's height: unregistered,
 * then 100, 50, 10 and 1 %. The value is how many of the four steps are clearer than the one before.
 */
async function orderRow(engine: Engine, known: KnownCapture, stars: NonNullable<KnownCapture['stars']>): Promise<Row> {
  const { stacker, surveyed } = engine.state!
  const faint = stars.reduce((a, b) => (b.deltaMag > a.deltaMag ? b : a))
  const others = stars.filter(star => star !== faint)
  const images = [engine.averageShown()]
  for (const fraction of [1, 0.5, 0.1, 0.01]) images.push(await engine.stack(keepCount(fraction, stacker.ranked), false))
  const contrast = images.map(({ samples, width, height }) => {
    const at = (x: number, y: number) => bilinear(samples, width, height, x, y)
    const home = brightest(samples, width, height)
    const top = at(home.x, home.y) - surveyed.survey.background
    const saddle = Math.max(...others.map(star => at(home.x + 0.5 * (faint.dx + star.dx), home.y + 0.5 * (faint.dy + star.dy))))
    return (at(home.x + faint.dx, home.y + faint.dy) - saddle) / top
  })
  const clearer = contrast.slice(1).filter((value, k) => value > contrast[k]!).length
  return {
    capture: known.name, what: `resolving improves: unregistered, 100, 50, 10, 1 % (${contrast.map(value => value.toFixed(3)).join(' < ')})`,
    value: clearer, digits: 0, reference: 4, want: 'higher', source: 'common practice: each step clearer',
  }
}

function brightest(samples: Float32Array, width: number, height: number): { x: number, y: number } {
  let best = 0
  for (let i = 1; i < width * height; i++) if (samples[i]! > samples[best]!) best = i
  // To a fraction of a pixel by a parabola on each axis.
  const peak = (a: number, b: number, c: number) => (2 * b - a - c > 0 ? 0.5 * (c - a) / (2 * b - a - c) : 0)
  return { x: best % width + peak(samples[best - 1]!, samples[best]!, samples[best + 1]!), y: Math.floor(best / width) + peak(samples[best - width]!, samples[best]!, samples[best + width]!) }
}

function bilinear(samples: Float32Array, width: number, height: number, x: number, y: number): number {
  const ix = Math.min(width - 2, Math.max(0, Math.floor(x)))
  const iy = Math.min(height - 2, Math.max(0, Math.floor(y)))
  const fx = x - ix
  const fy = y - iy
  const o = iy * width + ix
  return (1 - fy) * ((1 - fx) * samples[o]! + fx * samples[o + 1]!) + fy * ((1 - fx) * samples[o + width]! + fx * samples[o + width + 1]!)
}
