/** The air over the aperture as a function of time: layers of frozen phase carried by their winds. */
import type { RehearsalSpec } from './spec'
import type { Pupil } from './pupil'
import { createRandom } from './random'
import { createScreens, lowPhaseAt, type LowPhase } from './screen'

export interface Air {
  /** D/r0 at a time, s. */
  strength(seconds: number): number
  /** Phase at the pupil's points, rad at the wavelength of the optics × `colour` (reference over own wavelength); piston is arbitrary. `towards`: angle from the middle of the field, rad. */
  phase(seconds: number, pupil: Pupil, colour: number, out: Float64Array, towards?: { x: number, y: number }): void
}

/** Catmull-Rom weights for a fraction 0-1. */
function cubicWeights(f: number, out: Float64Array): void {
  out[0] = f * (-0.5 + f * (1 - 0.5 * f))
  out[1] = 1 + f * f * (-2.5 + 1.5 * f)
  out[2] = f * (0.5 + f * (2 - 1.5 * f))
  out[3] = f * f * (-0.5 + 0.5 * f)
}

/** `diameter`: grid points of the screen in the aperture. `size`: side of the periodic screen. */
export function createAir(air: RehearsalSpec['air'], apertureM: number, seed: number, diameter: number, size = 1024): Air {
  const random = createRandom(seed, 2)
  const shares = air.layers.reduce((sum, layer) => sum + layer.share, 0)
  const screens = air.apertureOverR0 > 0
    ? createScreens({ seed, size, step: 1 / diameter, outerScale: air.outerScaleM === null ? null : air.outerScaleM / apertureM, count: air.layers.length })
    : []
  const layers = screens.map((screen, i) => {
    const { share, speedMPerS, directionDeg } = air.layers[i]!
    const angle = directionDeg * Math.PI / 180
    const speed = speedMPerS / apertureM * diameter
    return { screen, gain: Math.sqrt(share / shares), x: size * random.uniform(), y: size * random.uniform(), vx: -speed * Math.cos(angle), vy: -speed * Math.sin(angle), lever: (air.layers[i]!.heightM ?? 0) / apertureM * diameter }
  })
  const swings = [1, 1.7, 3.1, 5.3].map((faster, i) => ({ rate: 2 * Math.PI * faster / air.gusts.periodS, phase: 2 * Math.PI * random.uniform(), share: [0.4, 0.28, 0.19, 0.13][i]! }))
  const strength = (seconds: number) => {
    let swing = 0
    for (const { rate, phase, share } of swings) swing += share * Math.sin(rate * seconds + phase)
    return air.apertureOverR0 * Math.max(0.05, 1 + air.gusts.amplitude * swing)
  }
  const mask = size - 1
  const wx = new Float64Array(4)
  const wy = new Float64Array(4)
  const low: LowPhase = { x: 0, y: 0, xx: 0, xy: 0, yy: 0 }

  const phase: Air['phase'] = (seconds, pupil, colour, out, towards) => {
    out.fill(0)
    low.x = low.y = low.xx = low.xy = low.yy = 0
    const scale = colour * strength(seconds) ** (5 / 6)
    for (const layer of layers) {
      const left = Math.round(layer.x + layer.vx * seconds + layer.lever * (towards?.x ?? 0))
      const top = Math.round(layer.y + layer.vy * seconds + layer.lever * (towards?.y ?? 0))
      const gain = scale * layer.gain
      const grid = layer.screen.phase
      lowPhaseAt(layer.screen, left / diameter, top / diameter, gain, low)
      if (pupil.screenStep === 1) {
        for (let i = 0; i < out.length; i++) out[i]! += gain * grid[((pupil.y[i]! + top) & mask) * size + ((pupil.x[i]! + left) & mask)]!
        continue
      }
      for (let i = 0; i < out.length; i++) {
        const x = left + pupil.x[i]! * pupil.screenStep
        const y = top + pupil.y[i]! * pupil.screenStep
        const column = Math.floor(x)
        const row = Math.floor(y)
        cubicWeights(x - column, wx)
        cubicWeights(y - row, wy)
        let value = 0
        for (let j = 0; j < 4; j++) {
          const start = ((row - 1 + j) & mask) * size
          for (let k = 0; k < 4; k++) value += wy[j]! * wx[k]! * grid[start + ((column - 1 + k) & mask)]!
        }
        out[i]! += gain * value
      }
    }
    const unit = pupil.screenStep / diameter
    for (let i = 0; i < out.length; i++) {
      const u = pupil.x[i]! * unit
      const v = pupil.y[i]! * unit
      out[i]! += u * (low.x + low.xx * u + low.xy * v) + v * (low.y + low.yy * v)
    }
  }
  return { strength, phase }
}
