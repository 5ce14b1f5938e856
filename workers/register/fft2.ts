/**
 * Two-dimensional Fourier transforms of real square windows, made of fft.js's one-dimensional ones, and only as
 * much of them as is needed: two real rows share one complex transform, and frequencies above a cut (where optics
 * or filter leave nothing) are neither computed nor kept.
 *
 * A spectrum holds kx = 0 … cut and ky = −cut … cut, complex interleaved; index of (kx, ky) is
 * 2 × (kx × (2 cut + 1) + ky + cut). The other half follows from F(−k) = conj F(k).
 */
import FFT from 'fft.js'
import { steadyCos, steadySin } from '../../shared/steadymath'

/** A one-dimensional complex transform of n points (power of two) whose tables are the same bits in every engine. */
export function createTransform(n: number): FFT {
  const fft = new FFT(n)
  const table = (fft as unknown as { table: number[] }).table
  for (let i = 0; i < table.length; i += 2) {
    const angle = Math.PI * i / n
    table[i] = steadyCos(angle)
    table[i + 1] = -steadySin(angle)
  }
  return fft
}

/** Number of values (2 per complex) in a spectrum with this cut. */
export const spectrumLength = (cut: number): number => 2 * (cut + 1) * (2 * cut + 1)

/** out = a × b, complex; out may be a. */
export function multiply(a: Float64Array, b: Float64Array, out: Float64Array): void {
  for (let o = 0; o < a.length; o += 2) {
    const re = a[o]!
    const im = a[o + 1]!
    out[o] = re * b[o]! - im * b[o + 1]!
    out[o + 1] = re * b[o + 1]! + im * b[o]!
  }
}

export interface ForwardTransform {
  /** Spectrum of an n × n real window; rows outside [firstRow, lastRow] must be zero and are skipped. */
  forward(window: Float32Array, out: Float64Array, firstRow?: number, lastRow?: number): void
}

/** @param cut highest frequency index kept, 1 … n/2 − 1 */
export function createForward(n: number, cut: number): ForwardTransform {
  const fft = createTransform(n)
  const packed = new Float64Array(2 * n)
  const row = new Float64Array(2 * n)
  const columns = Array.from({ length: cut + 1 }, () => new Float64Array(2 * n))
  const column = new Float64Array(2 * n)
  const rows = 2 * cut + 1
  return {
    forward(window, out, firstRow = 0, lastRow = n - 1) {
      const from = firstRow & ~1
      const to = lastRow | 1
      for (let kx = 0; kx <= cut; kx++) {
        columns[kx]!.fill(0, 0, 2 * from)
        columns[kx]!.fill(0, 2 * (to + 1))
      }
      for (let y = from; y <= to; y += 2) {
        const a = y * n
        const b = a + n
        for (let x = 0; x < n; x++) {
          packed[2 * x] = window[a + x]!
          packed[2 * x + 1] = window[b + x]!
        }
        fft.transform(row as unknown as number[], packed as unknown as number[])
        for (let kx = 0; kx <= cut; kx++) {
          const p = 2 * kx
          const q = kx === 0 ? 0 : 2 * (n - kx)
          const re = row[p]!
          const im = row[p + 1]!
          const reMirror = row[q]!
          const imMirror = row[q + 1]!
          const target = columns[kx]!
          target[2 * y] = 0.5 * (re + reMirror)
          target[2 * y + 1] = 0.5 * (im - imMirror)
          target[2 * y + 2] = 0.5 * (im + imMirror)
          target[2 * y + 3] = 0.5 * (reMirror - re)
        }
      }
      for (let kx = 0; kx <= cut; kx++) {
        fft.transform(column as unknown as number[], columns[kx]! as unknown as number[])
        let o = 2 * kx * rows
        for (let ky = -cut; ky <= cut; ky++) {
          const p = ky < 0 ? 2 * (n + ky) : 2 * ky
          out[o++] = column[p]!
          out[o++] = column[p + 1]!
        }
      }
    },
  }
}

export interface InverseTransform {
  /** Side of the real map that comes out; its pixel is n / side window pixels. */
  readonly side: number
  /** map[y × side + x] = (1/n²) Σ S(k) exp(+2πi k·(x, y)/side) over the whole (mirrored) spectrum. */
  inverse(spectrum: Float64Array, map: Float32Array): void
}

/** The inverse on the coarsest power-of-two grid that holds the cut without loss. */
export function createInverse(n: number, cut: number): InverseTransform {
  let side = 4
  while (side < 2 * cut + 2) side *= 2
  const fft = createTransform(side)
  const rows = 2 * cut + 1
  const packed = new Float64Array(2 * side)
  const line = new Float64Array(2 * side)
  const half = new Float64Array(2 * (cut + 1) * side)
  const scale = (side * side) / (n * n)
  return {
    side,
    inverse(spectrum, map) {
      for (let kx = 0; kx <= cut; kx++) {
        packed.fill(0)
        let o = 2 * kx * rows
        for (let ky = -cut; ky <= cut; ky++) {
          const p = ky < 0 ? 2 * (side + ky) : 2 * ky
          packed[p] = spectrum[o++]!
          packed[p + 1] = spectrum[o++]!
        }
        fft.inverseTransform(line as unknown as number[], packed as unknown as number[])
        for (let y = 0; y < side; y++) {
          const p = 2 * (y * (cut + 1) + kx)
          half[p] = line[2 * y]!
          half[p + 1] = line[2 * y + 1]!
        }
      }
      packed.fill(0)
      for (let y = 0; y < side; y += 2) {
        const a = 2 * y * (cut + 1)
        const b = a + 2 * (cut + 1)
        packed[0] = half[a]!
        packed[1] = half[b]!
        for (let kx = 1; kx <= cut; kx++) {
          const are = half[a + 2 * kx]!
          const aim = half[a + 2 * kx + 1]!
          const bre = half[b + 2 * kx]!
          const bim = half[b + 2 * kx + 1]!
          packed[2 * kx] = are - bim
          packed[2 * kx + 1] = aim + bre
          packed[2 * (side - kx)] = are + bim
          packed[2 * (side - kx) + 1] = bre - aim
        }
        fft.inverseTransform(line as unknown as number[], packed as unknown as number[])
        for (let x = 0; x < side; x++) {
          map[y * side + x] = line[2 * x]! * scale
          map[(y + 1) * side + x] = line[2 * x + 1]! * scale
        }
      }
    },
  }
}
