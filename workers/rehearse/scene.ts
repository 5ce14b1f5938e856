/** What the telescope looks at, as the transform of each colour plane of its canvas, pixel integration included. */
import type { SquareTransform } from './fft2'
import type { Geometry } from './geometry'
import { pixelScaleArcsec, type RehearsalSpec, type Scene } from './spec'
import { drawPlanet } from './planet'
import { drawTerrain } from './terrain'

export interface SceneTransfer {
  /** Interleaved complex, size² each; 1 for grey scenes or 3 (R, G, B). The scene's middle is at index 0. Unit: electrons. */
  planes: Float64Array[]
}

/** Place of a star from the first one, px x right, y down: dx = −sep sin(PA − up)/scale, dy = −sep cos(PA − up)/scale. */
export function skyToPixels(separationArcsec: number, positionAngleDeg: number, upDeg: number, scaleArcsec: number): { dx: number, dy: number } {
  const angle = (positionAngleDeg - upDeg) * Math.PI / 180
  return { dx: -separationArcsec * Math.sin(angle) / scaleArcsec, dy: -separationArcsec * Math.cos(angle) / scaleArcsec }
}

function sinc(x: number): number {
  return x === 0 ? 1 : Math.sin(Math.PI * x) / (Math.PI * x)
}

function starTransfer(scene: Extract<Scene, { kind: 'stars' }>, upDeg: number, scale: number, size: number): Float64Array {
  const out = new Float64Array(2 * size * size)
  for (const star of scene.stars) {
    const { dx, dy } = skyToPixels(star.separationArcsec, star.positionAngleDeg, upDeg, scale)
    const flux = scene.fluxElectrons * 10 ** (-0.4 * star.deltaMag)
    for (let row = 0, at = 0; row < size; row++) {
      const v = row < size / 2 ? row : row - size
      for (let column = 0; column < size; column++, at += 2) {
        const u = column < size / 2 ? column : column - size
        const angle = -2 * Math.PI * (u * dx + v * dy) / size
        out[at]! += flux * Math.cos(angle)
        out[at + 1]! += flux * Math.sin(angle)
      }
    }
  }
  return out
}

function drawingTransfer(plane: Float64Array, flux: number, transform: SquareTransform): Float64Array {
  const size = transform.size
  const half = size / 2
  const out = new Float64Array(2 * size * size)
  for (let row = 0; row < size; row++) {
    for (let column = 0; column < size; column++) {
      out[2 * (((row + half) % size) * size + (column + half) % size)] = flux * plane[row * size + column]!
    }
  }
  transform.forward(out)
  return out
}

/** Multiplies by the transform of a square pixel of one fine pixel's side. */
function integratePixels(plane: Float64Array, size: number): void {
  const line = Float64Array.from({ length: size }, (_, i) => sinc((i < size / 2 ? i : i - size) / size))
  for (let row = 0, at = 0; row < size; row++) {
    for (let column = 0; column < size; column++, at += 2) {
      const gain = line[row]! * line[column]!
      plane[at]! *= gain
      plane[at + 1]! *= gain
    }
  }
}

export function sceneTransfer(spec: RehearsalSpec, geometry: Geometry, transform: SquareTransform): SceneTransfer {
  const size = geometry.canvasSize
  const scale = pixelScaleArcsec(spec.optics) / geometry.oversample
  const { scene } = spec
  let planes: Float64Array[]
  if (scene.kind === 'blank') planes = [new Float64Array(2 * size * size)]
  else if (scene.kind === 'stars') planes = [starTransfer(scene, spec.upDeg, scale, size)]
  else {
    const drawing = scene.kind === 'planet' ? drawPlanet(scene, size, scale, spec.upDeg) : drawTerrain(scene, size, spec.upDeg)
    const flux = scene.fluxElectrons / geometry.oversample ** 2
    const wanted = spec.detector.mosaic === 'none' && drawing.planes.length === 3 ? [drawing.planes[1]!] : drawing.planes
    planes = wanted.map(plane => drawingTransfer(plane, flux, transform))
  }
  for (const plane of planes) integratePixels(plane, size)
  return { planes }
}
