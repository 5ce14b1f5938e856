/** Runs one known capture through the engine and compares what came out with the truth. */
import { defaultRecipe } from '../../shared/schemas/recipe'
import { keepCount } from '../../shared/schemas/run'
import { prepareColour } from '../../workers/prepare/frame'
import { Engine } from '../../workers/run/engine'
import { stackFigures } from '../../workers/score/figures'
import { nodePool } from '../lib/node-pool'
import { componentRows } from './components'
import { median, rankCorrelation, rms, type Row } from './rows'
import { sceneErrors } from './scene-error'
import type { KnownCapture } from './truth'

const FRACTIONS = [0.01, 0.1, 0.5, 1]

export async function judgeCapture(known: KnownCapture): Promise<Row[]> {
  const rows: Row[] = []
  const { references, strehl } = known
  const row = (key: string, what: string, value: number, digits: number, want: Row['want'], within = 0) =>
    rows.push({ capture: known.name, what, value, digits, want, reference: references[key] ?? null, within, source: key in references ? known.referenceSource : '' })

  const reader = await known.open()
  const pool = nodePool(1)
  const engine = new Engine(reader, { pool, budgetBytes: 2 ** 29 })
  try {
    const extended = known.scene !== 'stars'
    const started = performance.now()
    const state = await engine.run(defaultRecipe, known.optics, () => undefined, new AbortController().signal)
    const took = performance.now() - started
    const { survey, plan } = state.surveyed
    const { table } = state.graded
    const { shifts } = state.refined
    const count = table.count
    const frames = Array.from({ length: count }, (_, i) => i)
    const scored = frames.filter(i => table.setAside[i] === 0)
    const sure = frames.filter(i => shifts.setAside[i] === 0)

    rows.push({ capture: known.name, what: `${survey.form}, window ${survey.windowPx} px, blur ${survey.blurPx} px, ${plan.hotPixels.length} faulty pixels, ${(count / took * 1000).toFixed(0)} frames/s in all`, value: count, digits: 0, reference: null, want: 'none', source: 'frames' })
    const laplacian = rankCorrelation(scored.map(i => table.laplacian[i]!), scored.map(i => strehl[i]!))
    const peak = rankCorrelation(scored.map(i => table.peak[i]!), scored.map(i => strehl[i]!))
    const transfer = extended ? rankCorrelation(sure.map(i => shifts.transfer[i]!), sure.map(i => strehl[i]!)) : NaN
    row('score', 'rank correlation with the true Strehl: the score that ranks', state.measure === 'transfer' ? transfer : peak, 3, 'higher')
    row('', '  Laplacian variance', laplacian, 3, 'none')
    row('', '  peak intensity', peak, 3, 'none')
    if (extended) row('', '  transfer of detail', transfer, 3, 'none')
    row('', 'frames set aside', count - sure.length, 0, 'none')

    const against = (x: number[], y: number[], which: number[]): number[] => {
      const ex = which.map(i => -shifts.dx[i]! - x[i]!)
      const ey = which.map(i => -shifts.dy[i]! - y[i]!)
      const mx = median(ex)
      const my = median(ey)
      return ex.map((e, k) => Math.hypot(e - mx, ey[k]! - my))
    }
    const errors = against(known.peakX, known.peakY, sure)
    const best = state.ranking.order.slice(0, Math.max(1, Math.round(count / 10)))
    const errorOf = new Map(sure.map((i, k) => [i, errors[k]!]))
    const bestErrors = [...best].map(i => errorOf.get(i)!)
    row('median', 'shift against the PSF peak, registered frames: median, px', median(errors), 3, 'lower')
    row('', '  rms, px', rms(errors), 3, 'none')
    row('far', '  share off by more than 3 px', errors.filter(e => e > 3).length / errors.length, 4, 'lower')
    row('best10median', 'shift against the PSF peak, best 10 %: median, px', median(bestErrors), 3, 'lower')
    row('best10rms', '  rms, px', rms(bestErrors), 3, 'lower')
    if (extended && known.tiltX && known.tiltY) row('tiltRms', 'shift against the wavefront tilt, registered frames: rms, px', rms(against(known.tiltX, known.tiltY, sure)), 3, 'lower')

    if (known.sceneImage) {
      const stored = engine.average()
      const colour = plan.mosaic === 'none' ? stored.samples : new Float32Array(3 * plan.width * plan.height)
      if (plan.mosaic !== 'none') prepareColour(stored.samples as Float32Array<ArrayBuffer>, 0, plan, colour)
      row('nrms0', 'rms error against the scene through a perfect telescope, unregistered', sceneErrors({ ...stored, samples: colour, planes: plan.mosaic === 'none' ? stored.planes : 3 }, known).error, 3, 'none')
    }
    for (const fraction of FRACTIONS) {
      const kept = keepCount(fraction, state.ranking.order.length)
      const image = await engine.stack(kept, false)
      const percent = Math.round(fraction * 100)
      if (!extended) {
        const figures = stackFigures({ stack: image.samples, planes: image.planes, mosaic: false, noise: state.figurer.of(image).noise, count: kept, fraction, plan: state.surveyed.score, optics: known.optics })
        row(`strehl${percent}`, `Strehl of the stack at ${percent} %`, figures.strehl ?? NaN, 3, 'higher', 0.01)
        const reachable = [...state.ranking.order.slice(0, kept)].reduce((sum, i) => sum + strehl[i]!, 0) / kept
        row('', '  over the mean of these frames\' true Strehl', (figures.strehl ?? NaN) / reachable, 3, 'none')
        row('', '  full width at half maximum, px', figures.fwhmPx ?? NaN, 3, 'none')
        row('', '  peak over noise', figures.signalToNoise, 0, 'none')
      }
      else if (known.sceneImage && fraction > 0.02) {
        const { error, transfer } = sceneErrors(image, known)
        row(`nrms${percent}`, `rms error against the scene through a perfect telescope, ${percent} %`, error, 3, 'lower')
        row('', '  transfer at 0.2 of the cut-off', transfer[0]!, 2, 'none')
        row('', '  transfer at 0.3 of the cut-off', transfer[1]!, 2, 'none')
        if (percent !== 10) continue
        const sharper = await engine.stack(kept, true)
        const after = sceneErrors(sharper, known)
        const report = sharper.restoration!
        row('restored10', `rms error after the default restoration, ${percent} % (aim: 15 % less)`, after.error, 3, 'lower')
        rows.push({ capture: known.name, what: '  share of the unrestored error', value: after.error / error, digits: 3, want: 'lower', reference: 0.85, source: 'aim' })
        for (const k of [0, 1] as const) rows.push({ capture: known.name, what: `  transfer at ${k ? 0.3 : 0.2} of the cut-off, distance from 1 (reference: unrestored)`, value: Math.abs(1 - after.transfer[k]!), digits: 3, want: 'lower', reference: Math.abs(1 - transfer[k]!), source: `transfer ${after.transfer[k]!.toFixed(2)}` })
        row('', `  ${report.method}, gains ${report.gains.map(gain => gain.toFixed(2)).join(' ')}; D/r0 as measured`, report.apertureOverR0 ?? NaN, 2, 'none')
        row('', '  noise after over before', report.noiseGain ?? NaN, 2, 'none')
        row('', '  rim at a disc\'s limb, bright, % of the step', 100 * (report.overshoot.rimBright ?? NaN), 1, 'none')
        row('', '  rim at a disc\'s limb, dark, % of the step', 100 * (report.overshoot.rimDark ?? NaN), 1, 'none')
      }
    }
    rows.push(...await componentRows(engine, known))
    return rows
  }
  finally {
    pool.end()
    engine.close()
  }
}
