/** Mean power spectra and third-order cross spectra of short exposures, in blocks of time. */
import { createForward, spectrumLength } from '../../register/fft2'
import { createLoader } from '../../register/window'

/** Means of one block of time. Layout of spectra as in register/fft2.ts: kx = 0 … cut, ky = −cut … cut. */
export interface SpectrumBlock {
  frames: number
  /** |Î(u)|², real, (cut + 1) × (2 cut + 1). */
  power: Float64Array
  /** Transform of I² times the conjugate transform of I, complex interleaved. */
  third: Float64Array
}

export interface MeanSpectra { /** Side of the window, px. */ n: number, cut: number, blocks: SpectrumBlock[] }

/**
 * Adds exposures of a star. The power spectrum is Labeyrie's (1970, A&A 6, 85; from memory). The other one is the part of the
 * bispectrum that the triple correlation at (d, 0) needs (Lohmann, Weigelt & Wirnitzer 1983, Appl. Opt. 22, 4028; from memory):
 * neither changes when an exposure moves, so nothing has to be aligned.
 * @param n side of the window, px, a power of two
 */
export class SpectrumSum {
  readonly cut: number
  readonly blocks: SpectrumBlock[]
  readonly #window: Float32Array
  readonly #squared: Float32Array
  readonly #first: Float64Array
  readonly #second: Float64Array
  readonly #forward: ReturnType<typeof createForward>
  readonly #load: ReturnType<typeof createLoader>

  constructor(readonly width: number, readonly height: number, readonly n: number, blocks: number) {
    this.cut = n / 2 - 1
    const size = spectrumLength(this.cut)
    this.blocks = Array.from({ length: blocks }, () => ({ frames: 0, power: new Float64Array(size / 2), third: new Float64Array(size) }))
    this.#window = new Float32Array(n * n)
    this.#squared = new Float32Array(n * n)
    this.#first = new Float64Array(size)
    this.#second = new Float64Array(size)
    this.#forward = createForward(n, this.cut)
    this.#load = createLoader({ width, height, windowPx: n, form: 'star' })
  }

  /** @param x, y whole pixels in the middle of the window */
  add(frame: Float32Array, x: number, y: number, block: number): void {
    const half = this.n / 2
    this.#load(frame, x - half, y - half, this.#window)
    // Each exposure counts by its own light, so that clouds do not weigh.
    let flux = 0
    for (const value of this.#window) flux += value
    if (!(flux > 0)) return
    for (let i = 0; i < this.#window.length; i++) {
      const value = this.#window[i]! / flux
      this.#window[i] = value
      this.#squared[i] = value * value
    }
    this.#forward.forward(this.#window, this.#first)
    this.#forward.forward(this.#squared, this.#second)
    const into = this.blocks[block]!
    into.frames++
    for (let o = 0, p = 0; p < into.power.length; p++, o += 2) {
      const re = this.#first[o]!
      const im = this.#first[o + 1]!
      const re2 = this.#second[o]!
      const im2 = this.#second[o + 1]!
      into.power[p]! += re * re + im * im
      // F₂ F₁*: its inverse transform at d is Σ I²(x + d) I(x).
      into.third[o]! += re2 * re + im2 * im
      into.third[o + 1]! += im2 * re - re2 * im
    }
  }

  take(): MeanSpectra {
    return { n: this.n, cut: this.cut, blocks: this.blocks.filter(block => block.frames > 0) }
  }
}

/** The mean power of some blocks. */
export function meanPower(blocks: readonly SpectrumBlock[]): Float64Array {
  const out = new Float64Array(blocks[0]!.power.length)
  let frames = 0
  for (const block of blocks) {
    frames += block.frames
    for (let i = 0; i < out.length; i++) out[i]! += block.power[i]!
  }
  return out.map(value => value / frames)
}

/** Calls with the index and the place of every frequency up to a radius, each pair ±u once, without the middle. */
export function eachFrequency(cut: number, radius: number, visit: (index: number, kx: number, ky: number) => void): void {
  const rows = 2 * cut + 1
  const last = Math.min(cut, Math.floor(radius))
  for (let kx = 0; kx <= last; kx++) {
    for (let ky = kx === 0 ? 1 : -last; ky <= last; ky++) if (kx * kx + ky * ky <= radius * radius) visit(kx * rows + ky + cut, kx, ky)
  }
}

/** The power that noise alone has: that of the corners beyond all circles, where no optics that are sampled in full reach. */
export function noisePower({ cut }: MeanSpectra, power: Float64Array): number {
  const values: number[] = []
  const rows = 2 * cut + 1
  for (let kx = 0; kx <= cut; kx++) for (let ky = -cut; ky <= cut; ky++) if (kx * kx + ky * ky > (1.05 * cut) ** 2) values.push(power[kx * rows + ky + cut]!)
  return values.reduce((sum, value) => sum + value, 0) / values.length
}

export interface RadialPower {
  /** Mean power without that of noise at 0, 1, … cycles in the window, over that at 0. */
  values: number[]
  /** Power of noise in the same unit, and the standard error of each ring in it. */
  noise: number
  errors: number[]
  /** Cycles per px beyond which signal drowns in noise (below three standard errors of its ring). */
  drownsAt: number
}

/** The radial power spectrum: for stars, planets and terrain alike. */
export function radialPower(spectra: MeanSpectra): RadialPower {
  const { n, cut, blocks } = spectra
  const power = meanPower(blocks)
  const noise = noisePower(spectra, power)
  const frames = blocks.reduce((sum, block) => sum + block.frames, 0)
  const sums = new Float64Array(cut + 1)
  const counts = new Float64Array(cut + 1)
  eachFrequency(cut, cut, (index, kx, ky) => {
    const ring = Math.round(Math.hypot(kx, ky))
    if (ring > cut) return
    sums[ring]! += power[index]! - noise
    counts[ring]!++
  })
  const top = power[cut]! - noise
  const values = [1, ...Array.from({ length: cut }, (_, k) => sums[k + 1]! / Math.max(1, counts[k + 1]!) / top)]
  // The power of white noise is exponentially distributed: its standard deviation equals its mean.
  const errors = values.map((_, k) => noise / top / Math.sqrt(frames * Math.max(1, counts[k]!)))
  let last = 0
  while (last < cut && values[last + 1]! > 3 * errors[last + 1]!) last++
  return { values, noise: noise / top, errors, drownsAt: last / n }
}
