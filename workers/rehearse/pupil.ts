/** The aperture on a grid, and the point-spread function it makes of a phase. */
import { createSquareTransform, type SquareTransform } from './fft2'

export interface Pupil {
  /** Side of the grid; the point-spread function has as many pixels on a side. */
  readonly size: number
  /** Aperture in grid points, and grid points of the phase screen for one point of this grid. */
  readonly diameter: number
  readonly screenStep: number
  /** Points inside: place from the middle (whole grid points) and transmission, 0-1 at the grey edges. */
  readonly x: Int16Array
  readonly y: Int16Array
  readonly weight: Float64Array
  /** Diffraction-limited peak of a point-spread function of sum 1. */
  readonly peak: number
  /** Sum of the squared transmission. */
  readonly power: number
}

/**
 * `diameter` in grid points: size × (pixel on the sky) / (λ/D), so that one pixel of the transform is one of the detector.
 * `screenStep`: 1 where the screen was made for this grid; otherwise screen points for a point of this grid.
 */
export function createPupil(size: number, diameter: number, obstruction: number, screenStep = 1): Pupil {
  const parts = 6
  const outer = diameter / 2
  const inner = outer * obstruction
  const reach = Math.ceil(outer + 1)
  const x: number[] = []
  const y: number[] = []
  const weight: number[] = []
  for (let row = -reach; row <= reach; row++) {
    for (let column = -reach; column <= reach; column++) {
      let inside = 0
      for (let i = 0; i < parts; i++) {
        for (let j = 0; j < parts; j++) {
          const radius = Math.hypot(column + (i + 0.5) / parts - 0.5, row + (j + 0.5) / parts - 0.5)
          if (radius <= outer && radius >= inner) inside++
        }
      }
      if (inside === 0) continue
      x.push(column)
      y.push(row)
      weight.push(inside / (parts * parts))
    }
  }
  let sum = 0
  let power = 0
  for (const value of weight) {
    sum += value
    power += value * value
  }
  return {
    size, diameter, screenStep,
    x: Int16Array.from(x), y: Int16Array.from(y), weight: Float64Array.from(weight),
    peak: sum * sum / (size * size * power), power,
  }
}

export interface PsfMaker {
  /** Adds |transform of the pupil with this phase|² × gain; index 0 is the middle. A phase slope of 2π a/size a point moves it by +a px. */
  add(phase: Float64Array, gain: number, psf: Float64Array): void
}

export function createPsfMaker(pupil: Pupil, transform: SquareTransform = createSquareTransform(pupil.size)): PsfMaker {
  const { size, x, y, weight } = pupil
  const rows = { start: 0, count: y[y.length - 1]! - y[0]! + 1 }
  const field = new Float64Array(2 * size * size)
  // Rows start at the pupil's first one and columns wrap: that only turns the field's phase, not its intensity.
  const top = y[0]!
  const place = Int32Array.from(x, (column, i) => 2 * ((y[i]! - top) * size + ((column + size) % size)))
  return {
    add(phase, gain, psf) {
      field.fill(0)
      for (let i = 0; i < place.length; i++) {
        const at = place[i]!
        field[at] = weight[i]! * Math.cos(phase[i]!)
        field[at + 1] = weight[i]! * Math.sin(phase[i]!)
      }
      transform.forward(field, rows)
      for (let i = 0, at = 0; i < psf.length; i++, at += 2) psf[i]! += gain * (field[at]! * field[at]! + field[at + 1]! * field[at + 1]!)
    },
  }
}

/** Brightest point of a wrapped point-spread function, refined by a parabola through the logarithms on each axis. */
export function psfPeak(psf: Float64Array, size: number): { x: number, y: number, value: number } {
  let best = 0
  for (let i = 1; i < psf.length; i++) if (psf[i]! > psf[best]!) best = i
  const column = best % size
  const row = (best - column) / size
  const at = (x: number, y: number) => Math.log(Math.max(1e-300, psf[((y + size) % size) * size + ((x + size) % size)]!))
  const centre = at(column, row)
  const refine = (before: number, after: number) => {
    const bend = before - 2 * centre + after
    const offset = bend < 0 ? Math.max(-0.5, Math.min(0.5, 0.5 * (before - after) / bend)) : 0
    return { offset, gain: bend < 0 ? -0.25 * (before - after) * offset : 0 }
  }
  const horizontal = refine(at(column - 1, row), at(column + 1, row))
  const vertical = refine(at(column, row - 1), at(column, row + 1))
  const centred = (value: number) => (value > size / 2 ? value - size : value)
  return { x: centred(column + horizontal.offset), y: centred(row + vertical.offset), value: Math.exp(centre + horizontal.gain + vertical.gain) }
}
