/** The demo captures of the bench: invented targets, small enough to be made on the spot. */
import type { RehearsalSpec } from './spec'

export type DemoScene = 'double' | 'triple' | 'planet' | 'terrain'

// Winds off the axes by angles of irrational slope, so that their tracks over the periodic screen do not meet themselves.
const layers = [{ share: 0.62, speedMPerS: 5, directionDeg: 31.7 }, { share: 0.38, speedMPerS: 9, directionDeg: 112.5 }]
const steady = { startX: 0, startY: 0, rateXPxPerS: 0, rateYPxPerS: 0, periodicPx: 0, periodS: 60, shakePx: 0, jumps: [] }

const double: RehearsalSpec = {
  name: 'Tern double', seed: 2101, width: 96, height: 96, frames: 1200, start: '2026-11-14T20:41:07.000Z',
  exposureMs: 6, intervalMs: 12, subSteps: 2,
  optics: { apertureMm: 250, focalLengthMm: 5500, pixelSizeUm: 2.9, obstruction: 0.21, wavelengthNm: 550 },
  air: { apertureOverR0: 4.6, outerScaleM: 25, layers, gusts: { amplitude: 0.3, periodS: 7 } },
  scene: { kind: 'stars', fluxElectrons: 42_000, stars: [{ separationArcsec: 0, positionAngleDeg: 0, deltaMag: 0 }, { separationArcsec: 1.24, positionAngleDeg: 218, deltaMag: 0.9 }] },
  upDeg: 0, motion: { ...steady, startX: 5, startY: -6, rateXPxPerS: -0.35, rateYPxPerS: 0.3, periodicPx: 1.5, periodS: 8, shakePx: 0.2 },
  cloud: null, dropShare: 0.004,
  detector: { bitDepth: 16, gain: 12, bias: 700, readNoise: 1.6, skyElectrons: 0.5, hotPixels: 5, hotElectrons: [40, 90], mosaic: 'none' },
}

const triple: RehearsalSpec = {
  ...double, name: 'Larch triple', seed: 2202, frames: 1400, start: '2026-11-21T22:41:30.000Z', exposureMs: 5, intervalMs: 16,
  optics: { apertureMm: 350, focalLengthMm: 5400, pixelSizeUm: 2.9, obstruction: 0.33, wavelengthNm: 550 },
  air: { ...double.air, apertureOverR0: 6, gusts: { amplitude: 0.3, periodS: 9 } },
  scene: { kind: 'stars', fluxElectrons: 34_000, stars: [
    { separationArcsec: 0, positionAngleDeg: 0, deltaMag: 0 }, { separationArcsec: 2.16, positionAngleDeg: 104, deltaMag: 0.4 }, { separationArcsec: 1.02, positionAngleDeg: 91, deltaMag: 2.3 }] },
  motion: { ...steady, startX: 12, startY: -4, rateXPxPerS: -0.2, rateYPxPerS: 0.25, periodicPx: 1.2, periodS: 11, shakePx: 0.25, jumps: [{ frame: 880, dx: -5, dy: 3 }] },
  cloud: { atS: 16, widthS: 1.6, depth: 0.45 },
  detector: { bitDepth: 8, gain: 0.24, bias: 6, readNoise: 2, skyElectrons: 0.5, hotPixels: 5, hotElectrons: [80, 300], mosaic: 'none' },
}

const planet: RehearsalSpec = {
  ...double, name: 'Saffron planet', seed: 2303, width: 160, height: 160, frames: 300, start: '2026-11-15T01:12:44.000Z', exposureMs: 8, intervalMs: 15,
  optics: { apertureMm: 280, focalLengthMm: 4200, pixelSizeUm: 2.9, obstruction: 0.3, wavelengthNm: 530 },
  air: { ...double.air, apertureOverR0: 3.5, gusts: { amplitude: 0.35, periodS: 3 } },
  scene: { kind: 'planet', seed: 12, diameterArcsec: 17, poleDeg: 17, tiltDeg: 3, fluxElectrons: 340 },
  motion: { ...steady, startX: 3, startY: 2, rateXPxPerS: -0.8, rateYPxPerS: 0.5, periodicPx: 2, periodS: 4, shakePx: 0.2 },
  dropShare: 0,
  detector: { bitDepth: 8, gain: 0.62, bias: 5, readNoise: 2, skyElectrons: 0.2, hotPixels: 8, hotElectrons: [40, 200], mosaic: 'RGGB' },
}

const terrain: RehearsalSpec = {
  ...double, name: 'Quarry patch', seed: 2404, width: 192, height: 160, frames: 300, start: '2026-11-28T19:05:12.000Z', exposureMs: 6, intervalMs: 20,
  optics: { apertureMm: 280, focalLengthMm: 4200, pixelSizeUm: 2.9, obstruction: 0.3, wavelengthNm: 620 },
  air: { ...double.air, apertureOverR0: 3.8, gusts: { amplitude: 0.35, periodS: 4 } },
  scene: { kind: 'terrain', seed: 5, sunAltitudeDeg: 21, sunAzimuthDeg: 285, fluxElectrons: 900 },
  motion: { ...steady, startX: -4, startY: 3, rateXPxPerS: 1.1, rateYPxPerS: -0.6, periodicPx: 2, periodS: 5, shakePx: 0.2 },
  dropShare: 0,
  detector: { bitDepth: 12, gain: 3.2, bias: 120, readNoise: 2.5, skyElectrons: 0.5, hotPixels: 10, hotElectrons: [200, 1200], mosaic: 'none' },
}

export const demoScenes: Record<DemoScene, RehearsalSpec> = { double, triple, planet, terrain }

export function demoScene(name: DemoScene): RehearsalSpec {
  return demoScenes[name]
}
