/** Power of signal and noise by frequency, from two halves that share no frame. */
import { createForward, spectrumLength } from '../register/fft2'
import { steadyCos } from '../../shared/steadymath'

export interface RadialSpectra {
  /** Width of a bin, cycles per px; bin i holds frequencies from i × step. */
  step: number
  /** Mean cross power of the halves: the signal's power, which noise does not raise; may be negative where there is none. */
  signal: Float64Array
  /** Noise power of the mean of both halves, from their difference: all that differs between them. */
  noise: Float64Array
  /** Independent values in each bin. */
  count: Float64Array
}

/** Largest side that is transformed; of larger images the middle. */
const MOST = 512

/**
 * Two half stacks of one plane. A Hann window over the middle 94 % keeps edges out. The bins are 2/n cycles per px wide, n the
 * power of two that holds the image; their sums are those of n² transforms, so that spectra of one size compare.
 */
export function radialSpectra(a: Float32Array, b: Float32Array, width: number, height: number): RadialSpectra {
  const trim = (side: number) => Math.min(MOST, side - 2 * Math.round(0.03 * side))
  const w = trim(width)
  const h = trim(height)
  let n = 16
  while (n < Math.max(w, h)) n *= 2
  const cut = n / 2 - 1
  const forward = createForward(n, cut)
  const x0 = (width - w) >> 1
  const y0 = (height - h) >> 1
  const transform = (image: Float32Array) => {
    const out = new Float64Array(spectrumLength(cut))
    forward.forward(windowed(image, width, x0, y0, w, h, n), out, 0, h - 1)
    return out
  }
  const fa = transform(a)
  const fb = transform(b)
  const step = 2 / n
  const bins = Math.ceil(0.5 / step)
  const spectra: RadialSpectra = { step, signal: new Float64Array(bins), noise: new Float64Array(bins), count: new Float64Array(bins) }
  for (let kx = 0, o = 0; kx <= cut; kx++) {
    for (let ky = -cut; ky <= cut; ky++, o += 2) {
      const bin = Math.floor(Math.sqrt(kx * kx + ky * ky) / n / step)
      if (bin >= bins || (kx === 0 && ky <= 0)) continue
      spectra.signal[bin]! += fa[o]! * fb[o]! + fa[o + 1]! * fb[o + 1]!
      const re = fa[o]! - fb[o]!
      const im = fa[o + 1]! - fb[o + 1]!
      spectra.noise[bin]! += 0.25 * (re * re + im * im)
      spectra.count[bin]!++
    }
  }
  for (let i = 0; i < bins; i++) {
    const m = Math.max(1, spectra.count[i]!)
    spectra.signal[i]! /= m
    spectra.noise[i]! /= m
    // The window and the padding make neighbours alike: about 3/8 of the values per axis are independent, times the filling.
    spectra.count[i]! *= 0.14 * w * h / (n * n) + 1e-9
  }
  return spectra
}

function windowed(image: Float32Array, width: number, x0: number, y0: number, w: number, h: number, n: number): Float32Array {
  let mean = 0
  for (let y = 0; y < h; y++) for (let x = 0; x < w; x++) mean += image[(y + y0) * width + x + x0]!
  mean /= w * h
  const hann = (i: number, side: number) => 0.5 - 0.5 * steadyCos(2 * Math.PI * (i + 0.5) / side)
  const along = Float64Array.from({ length: w }, (_, x) => hann(x, w))
  const out = new Float32Array(n * n)
  for (let y = 0; y < h; y++) {
    const down = hann(y, h)
    for (let x = 0; x < w; x++) out[y * n + x] = (image[(y + y0) * width + x + x0]! - mean) * down * along[x]!
  }
  return out
}

/** Share of the power of the mean that is signal, 0-1: the Wiener weight, or the correlation of two stacks of this size. */
export function signalShare({ signal, noise }: RadialSpectra, bin: number): number {
  const s = Math.max(0, signal[bin]!)
  return s > 0 ? s / (s + noise[bin]!) : 0
}

/** The same smoothed over five bins and never rising with frequency: chance agreement far out is no signal. */
export function steadyShare(spectra: RadialSpectra): Float64Array {
  const bins = spectra.signal.length
  const out = new Float64Array(bins)
  let least = 1
  for (let i = 0; i < bins; i++) {
    let s = 0
    let n = 0
    for (let k = Math.max(0, i - 2); k <= Math.min(bins - 1, i + 2); k++) {
      const share = signalShare(spectra, k)
      s += share * spectra.count[k]!
      n += spectra.count[k]!
    }
    least = Math.min(least, s / n)
    out[i] = least
  }
  return out
}
