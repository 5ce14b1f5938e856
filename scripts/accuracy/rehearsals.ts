/** Captures made on the spot, with the truth that the simulator knows. */
import type { StackImage } from '../../workers/api'
import { defaultRecipe } from '../../shared/schemas/recipe'
import { demoScene, rehearsalReader, type RehearsalSpec } from '../../workers/rehearse/index'
import { Engine } from '../../workers/run/engine'
import { rehearsalGeometry } from '../../workers/rehearse/geometry'
import { skyToPixels } from '../../workers/rehearse/scene'
import { pixelScaleArcsec } from '../../workers/rehearse/spec'
import { nodePool } from '../lib/node-pool'
import type { Row } from './rows'
import type { KnownCapture } from './truth'

function specs(): { spec: RehearsalSpec, scene: KnownCapture['scene'] }[] {
  const double = demoScene('double')
  const terrain = demoScene('terrain')
  // Half of the turbulence lies at a height, so that the air differs over the field.
  const layers = [{ share: 0.4, speedMPerS: 5, directionDeg: 31.7 }, { share: 0.6, speedMPerS: 9, directionDeg: 112.5, heightM: 4000 }]
  return [
    { spec: { ...double, frames: 600 }, scene: 'stars' },
    { spec: { ...demoScene('triple'), frames: 600 }, scene: 'stars' },
    // Close to the limit, near-equal, faint, behind a cloud, with a bump against the telescope.
    {
      spec: {
        ...double, name: 'close pair through cloud', seed: 77, frames: 600, cloud: { atS: 3, widthS: 1.2, depth: 0.7 },
        scene: { kind: 'stars', fluxElectrons: 9000, stars: [{ separationArcsec: 0, positionAngleDeg: 0, deltaMag: 0 }, { separationArcsec: 0.65, positionAngleDeg: 61, deltaMag: 0.3 }] },
        motion: { ...double.motion, jumps: [{ frame: 300, dx: 11, dy: -7 }] },
      },
      scene: 'stars',
    },
    { spec: { ...demoScene('planet'), frames: 200 }, scene: 'planet' },
    { spec: { ...demoScene('planet'), name: 'planet in grey', seed: 31, frames: 200, air: { ...demoScene('planet').air, apertureOverR0: 5 }, detector: { ...demoScene('planet').detector, mosaic: 'none' } }, scene: 'planet' },
    { spec: { ...demoScene('terrain'), frames: 120 }, scene: 'terrain' },
    { spec: { ...demoScene('terrain'), name: 'patch in calm air', seed: 32, frames: 120, air: { ...demoScene('terrain').air, apertureOverR0: 2.2 } }, scene: 'terrain' },
    ...[33, 34, 35].map(seed => ({ spec: { ...terrain, name: `patch through air that differs over the field, ${seed}`, seed, frames: 80, air: { ...terrain.air, layers } }, scene: 'terrain' as const })),
  ]
}

/** The scene of a grey extended rehearsal without air and (nearly) without noise, somewhat larger than the frames; null for others. */
export async function perfectImage(spec: RehearsalSpec): Promise<KnownCapture['sceneImage']> {
  const { scene, detector } = spec
  if ((scene.kind !== 'planet' && scene.kind !== 'terrain') || detector.mosaic !== 'none') return null
  const still = { ...spec.motion, startX: 0, startY: 0, rateXPxPerS: 0, rateYPxPerS: 0, periodicPx: 0, shakePx: 0, jumps: [] }
  const air = { ...spec.air, apertureOverR0: 0 }
  // A scene is drawn on a square that fits the motion: the same square, or it would be another scene.
  const canvas = rehearsalGeometry(spec).canvasSize
  let pad = 512
  while (pad > 0 && rehearsalGeometry({ ...spec, air, motion: still, width: spec.width + pad, height: spec.height + pad }).canvasSize > canvas) pad -= 4
  const width = spec.width + pad
  const height = spec.height + pad
  const reader = await rehearsalReader({
    ...spec, width, height, frames: 1, subSteps: 1, cloud: null, dropShare: 0, air, motion: still,
    scene: { ...scene, fluxElectrons: 1e6 },
    detector: { ...detector, bitDepth: 16, gain: 60_000 / 1.2e6, bias: 200, readNoise: 0, skyElectrons: 0, hotPixels: 0 },
  })
  const { samples } = await reader.readFrames(0, 1)
  return { planes: [Float32Array.from(samples)], width, height, blurred: true }
}

export async function* rehearsalTruths(): AsyncGenerator<KnownCapture> {
  for (const { spec, scene } of specs()) {
    const reader = await rehearsalReader(spec)
    const truths = Array.from({ length: spec.frames }, (_, i) => reader.truth(i))
    yield {
      name: `rehearsal: ${spec.name}`,
      scene,
      open: () => Promise.resolve(reader),
      strehl: truths.map(t => t.strehl),
      stars: spec.scene.kind === 'stars' ? spec.scene.stars.map(star => ({ ...skyToPixels(star.separationArcsec, star.positionAngleDeg, spec.upDeg, pixelScaleArcsec(spec.optics)), deltaMag: star.deltaMag })) : null,
      peakX: truths.map(t => t.placeX + t.psfPeakX),
      peakY: truths.map(t => t.placeY + t.psfPeakY),
      tiltX: null,
      tiltY: null,
      optics: spec.optics,
      references: {},
      referenceSource: '',
      sceneImage: await perfectImage(spec),
      wavelengthsNm: [spec.optics.wavelengthNm],
    }
  }
}

/** A capture of nothing: it must be called that, and whatever is stacked must not draw the reference. */
export async function blankRows(): Promise<Row[]> {
  const spec: RehearsalSpec = { ...demoScene('double'), name: 'nothing but noise', scene: { kind: 'blank' }, frames: 400 }
  const reader = await rehearsalReader(spec)
  const pool = nodePool(1)
  const engine = new Engine(reader, { pool, budgetBytes: 2 ** 28 })
  try {
    const { surveyed, ranking } = await engine.run(defaultRecipe, null, () => undefined, new AbortController().signal)
    const stack: StackImage | null = ranking.order.length > 0 ? await engine.stack(ranking.order.length, false) : null
    const { signal, confirmed, drawn } = await engine.evidence()
    const source = 'alignment on noise draws its template (Henderson 2013, PNAS 110, 18037)'
    return [{
      capture: 'noise only', what: `told as "no signal" (1 is yes); ${ranking.order.length} of ${spec.frames} frames were left to stack${stack ? `, stack of ${stack.count}` : ''}`,
      value: surveyed.survey.noSignal && !signal ? 1 : 0, digits: 0, reference: 1, want: 'higher', source,
    }, {
      capture: 'noise only', what: `stack-template correlation as shown (with the pixels that were aligned: ${drawn?.toFixed(2) ?? '–'})`,
      value: confirmed ?? NaN, digits: 2, reference: 0.1, want: 'lower', source,
    }]
  }
  finally {
    pool.end()
    engine.close()
  }
}
