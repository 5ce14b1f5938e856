/** Measures a double or multiple star on the unrestored stack of a finished run. */
import type { StackImage } from '../api'
import { added, errorsOf, findAndFit, limitsOf, LEAST_BLOCKS, meanAnswer, refit, settingErrors, valuesWith } from '../measure/pair/measure'
import { pixelNoise, skyNoise, type NoiseModel } from '../measure/pair/noise'
import { bootstrapErrors } from '../measure/pair/bootstrap'
import { look } from '../measure/pair/find'
import { MeasureError, type Component, type MeasureImage } from '../measure/pair/types'
import { angleDifference } from '../../shared/astro/angles'
import type { MeasureRequest, MeasureResult, NoMeasure, PairMeasure, PairValues, StabilityRow } from '../../shared/schemas/measure'
import { keepCount } from '../../shared/schemas/run'
import { stackLuminance } from '../score/figures'
import type { RunState } from './engine'
import type { FrameStore } from './frames'
import { fringesOf, spectraOf } from './fringes'

/** Blocks of time: enough to tell an error, long enough that they do not share their air. */
const BLOCKS = 32
const FRACTIONS = [0.05, 0.1, 0.2, 0.5, 1]
/** Frames that may be read again for the errors of other fractions. */
const MOST_FRAMES = 20_000
/** Brightness of two stars must differ by so many errors for the quadrant to be determined. */
const QUADRANT_SIGMAS = 3

/** @param frameStore the run's frames; needed where fringes are asked for */
export async function measurePair(state: RunState, request: MeasureRequest, signal?: AbortSignal, frameStore?: FrameStore): Promise<MeasureResult> {
  const result = await measureStack(state, request, signal)
  if (!request.fringes || !frameStore || request.components !== 2 || result.kind === 'no-signal' || state.surveyed.survey.kind !== 'star') return result
  await breathe()
  const fringes = fringesOf(await spectraOf(state, frameStore, signal))
  if (result.kind !== 'measured') return { ...result, fringes }
  if (!fringes.values) return { ...result, fringes }
  const own = fringes.values.quadrant === 'determined' ? fringes.values : towards(fringes.values, result.values[0]!)
  // The stack and the spectrum see the same frames: their errors are not independent, and the larger one is taken.
  const fringesDiffer = disagreement(result.values, [own])
  const warnings = [...result.warnings]
  if (fringesDiffer > 3.5) warnings.push({ code: 'fringes', text: `The fringes of the power spectrum give another result, by ${fringesDiffer.toFixed(1)} times its error.` })
  return { ...result, fringes: { ...fringes, values: { ...own, quadrant: fringes.values.quadrant } }, fringesDiffer, warnings }
}

/** Fringes whose side is not settled, turned to the side that the stack shows. */
function towards(values: PairValues, stack: PairValues): PairValues {
  return Math.abs(angleDifference(values.paDeg, stack.paDeg)) > 90 ? { ...values, paDeg: (values.paDeg + 180) % 360 } : values
}

async function measureStack(state: RunState, { components: wanted, fraction, hints }: MeasureRequest, signal?: AbortSignal): Promise<MeasureResult> {
  const { surveyed: { survey }, stacker } = state
  const frames = keepCount(fraction, stacker.ranked)
  const none = (kind: NoMeasure['kind'], text: string, more: Partial<NoMeasure> = {}): NoMeasure => ({ kind, frames, fraction, text, fwhmPx: null, limits: [], ...more })
  if (survey.noSignal || frames === 0) return none('no-signal', survey.noSignalText || 'No frame can be used.')
  if (survey.kind !== 'star') return none('unresolved', 'This capture was taken for an extended target; double stars are measured on captures of stars. Say so where the target’s kind is shown, if it is one.')
  const image = luminanceOf(state, await stacker.stack(frames, signal))
  const noise = noiseOf(state, frames)
  let found
  try {
    found = findAndFit(image, wanted, noise, hints)
  }
  catch (reason) {
    if (!(reason instanceof MeasureError)) throw reason
    return none('unresolved', `${reason.message} Mark the stars on the image, or keep other frames.`)
  }
  if (!('solved' in found)) {
    const text = found.found < 2 ? 'No companion stands out from the brightest star in this stack.' : `Only ${found.found} stars stand out in this stack.`
    return none('unresolved', text, { fwhmPx: found.scene.fwhmPx, limits: limitsOf(image, found.scene) })
  }
  const { solved, fit } = found
  await breathe()
  const blocks = await blocksOf(state, frames, signal)
  const { errors, answers } = errorsOf(solved, blocks)
  await breathe()
  const values = valuesWith(fit.components, added(errors, settingErrors(image, solved, found.scene, noise)))
  const stability = [...await fractionsOf(state, fraction, fit.components, signal), ...halvesOf(answers)]
  const signalToNoise = fit.peak / Math.sqrt(noise(0))
  const measure: PairMeasure = {
    kind: 'measured', frames, fraction, blocks: answers.length >= LEAST_BLOCKS ? answers.length : 0, components: fit.components,
    values: values.map(value => ({ ...value, quadrant: Math.abs(value.dMag) > QUADRANT_SIGMAS * value.dMagErr ? 'determined' : 'undetermined' })),
    blind: found.blind, fwhmPx: fit.fwhmPx, signalToNoise, stability, warnings: [],
  }
  return { ...measure, warnings: warningsOf(state, image, measure) }
}

function luminanceOf({ surveyed: { plan } }: RunState, { samples, planes, width, height }: StackImage): MeasureImage {
  return { samples: stackLuminance(samples, planes, planes === 1 && plan.mosaic !== 'none', width, height), width, height }
}

/** Variance of the stack of `frames` frames from the halves of the nearest rung that has some. */
function noiseOf(state: RunState, frames: number): NoiseModel {
  const { stacker, ladder } = state
  let rung = stacker.rungBelow(frames)
  while (rung < ladder.counts.length - 1 && ladder.counts[rung]! < 4) rung++
  const halves = stacker.halves(rung)
  const single = state.surveyed.survey.noise / Math.sqrt(frames)
  if (!halves) return pixelNoise(Math.max(single, 1e-12))
  const [one, other] = halves.map(samples => luminanceOf(state, { samples, planes: ladder.planes, width: ladder.width, height: ladder.height, count: 0, restored: false }).samples)
  return pixelNoise(Math.max(skyNoise(one!, other!) * Math.sqrt(stacker.countOf(rung) / frames), 1e-12))
}

/** Lets messages through: fits take a good part of a second each. */
const breathe = () => new Promise<void>(resolve => setTimeout(resolve, 0))

async function blocksOf(state: RunState, frames: number, signal?: AbortSignal): Promise<MeasureImage[]> {
  const blocks: MeasureImage[] = []
  await state.stacker.blocks(frames, Math.min(BLOCKS, frames), image => blocks.push(luminanceOf(state, image)), signal)
  return blocks
}

/** The same fit at the standard fractions. */
async function fractionsOf(state: RunState, own: number, start: readonly Component[], signal?: AbortSignal): Promise<StabilityRow[]> {
  const rows: StabilityRow[] = []
  let read = 0
  for (const fraction of FRACTIONS) {
    await breathe()
    signal?.throwIfAborted()
    const frames = keepCount(fraction, state.stacker.ranked)
    if (frames === 0 || fraction === own) continue
    const image = luminanceOf(state, await state.stacker.stack(frames, signal))
    try {
      const solved = refit(image, start, look(image), noiseOf(state, frames))
      read += frames
      const { errors } = errorsOf(solved, read <= MOST_FRAMES ? await blocksOf(state, frames, signal) : [])
      rows.push({ of: { fraction }, frames, values: valuesWith(solved.state.components, errors) })
    }
    catch (reason) {
      if (!(reason instanceof MeasureError)) throw reason
      rows.push({ of: { fraction }, frames, values: null })
    }
  }
  return rows
}

/** First and second half in time: looks that share no frame. */
function halvesOf(answers: readonly Component[][]): StabilityRow[] {
  if (answers.length < 2 * LEAST_BLOCKS) return []
  const middle = answers.length >> 1
  return ([['first', answers.slice(0, middle)], ['second', answers.slice(middle)]] as const).map(([half, part]) => {
    const mean = meanAnswer(part)
    return { of: { half }, frames: 0, values: valuesWith(mean, bootstrapErrors(part, mean)) }
  })
}

function warningsOf(state: RunState, image: MeasureImage, measure: PairMeasure): PairMeasure['warnings'] {
  const warnings: PairMeasure['warnings'] = []
  const saturation = state.surveyed.plan.saturation
  const top = image.samples.reduce((best, value) => Math.max(best, value), -Infinity)
  if (saturation !== null && top > 0.9 * saturation) warnings.push({ code: 'saturated', text: 'The brighter star reaches the top of the detector’s range: its brightness, and so the magnitude difference, cannot be trusted. Expose shorter.' })
  if (measure.blocks === 0) warnings.push({ code: 'few-frames', text: `${measure.frames} frames are too few to tell the error from their scatter; the error shown is that of the fit alone and may be too small. Keep more frames.` })
  for (const row of measure.stability) {
    if (!row.values) continue
    const off = disagreement(measure.values, row.values)
    if (off > 3.5) {
      const name = 'half' in row.of ? `The ${row.of.half} half of the time` : `The stack at ${Math.round(row.of.fraction * 100)} %`
      warnings.push({ code: 'unstable', text: `${name} gives another result, by ${off.toFixed(1)} times its error.` })
    }
  }
  if (measure.values.some(value => value.quadrant === 'undetermined')) warnings.push({ code: 'quadrant', text: 'The stars are too alike in brightness to tell which is the brighter: the angle may be off by 180°.' })
  return warnings
}

/** Largest difference over its error; errors of the same frames are not independent, so the larger of both is taken. */
function disagreement(a: readonly PairValues[], b: readonly PairValues[]): number {
  return Math.max(...a.map((one, j) => {
    const other = b[j]!
    return Math.max(
      Math.abs(one.sepPx - other.sepPx) / Math.max(one.sepPxErr, other.sepPxErr, 1e-9),
      Math.abs(angleDifference(one.paDeg, other.paDeg)) / Math.max(one.paDegErr, other.paDegErr, 1e-9),
      Math.abs(one.dMag - other.dMag) / Math.max(one.dMagErr, other.dMagErr, 1e-9))
  }))
}
