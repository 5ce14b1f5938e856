/**
 * Coarse search for a target that fills the field: the binned frame against the binned reference by FFT
 * cross-correlation, band-passed so that shading and noise do not decide.
 */
import { steadyCos, steadyExp } from '../../shared/steadymath'
import { createForward, createInverse, spectrumLength } from '../register/fft2'
import { createBlocks, fillBlocks } from './blocks'
import { quadraticAt } from './measures'
import type { CoarseGuide } from './types'

/** Longest side of the binned image. */
const GUIDE_SIDE = 96

/** The guide for a reference (luminance, full frame). */
export function makeGuide(reference: Float32Array, width: number, height: number): CoarseGuide {
  let bin = 1
  while (Math.max(width, height) / bin > GUIDE_SIDE) bin *= 2
  const blocks = createBlocks(width, height, bin)
  fillBlocks(reference, width, blocks)
  let size = 8
  while (size < Math.max(blocks.columns, blocks.rows)) size *= 2
  return { bin, size, samples: blocks.means.slice(), width: blocks.columns, height: blocks.rows }
}

/** A window that is 1 inside and falls to 0 over `share` of the length at both ends (Tukey). */
export function taper(length: number, share: number): Float64Array {
  const w = new Float64Array(length).fill(1)
  const edge = Math.max(1, Math.floor(length * share))
  for (let i = 0; i < edge && i < length; i++) {
    const v = 0.5 - 0.5 * steadyCos(Math.PI * (i + 0.5) / edge)
    w[i]! *= v
    w[length - 1 - i]! *= v
  }
  return w
}

export interface Follower {
  /** Where the reference's content lies in this frame: frame place = reference place + shift, px. */
  shift(frame: Float32Array, out: { x: number, y: number, strength: number }): void
}

export function createFollower(guide: CoarseGuide, frameWidth: number, frameHeight: number): Follower {
  const { bin, size, width, height } = guide
  const cut = size / 2 - 1
  const forward = createForward(size, cut)
  const inverse = createInverse(size, cut)
  const spectrum = new Float64Array(spectrumLength(cut))
  const pattern = new Float64Array(spectrumLength(cut))
  const window = new Float32Array(size * size)
  const map = new Float32Array(inverse.side * inverse.side)
  const turned = new Float32Array(inverse.side * inverse.side)
  const blocks = createBlocks(frameWidth, frameHeight, bin)
  const across = taper(width, 0.15)
  const down = taper(height, 0.15)
  const peak = { x: 0, y: 0, value: 0 }

  const load = (samples: Float32Array) => {
    let mean = 0
    for (let i = 0; i < samples.length; i++) mean += samples[i]!
    mean /= samples.length
    for (let y = 0; y < height; y++) {
      for (let x = 0; x < width; x++) window[y * size + x] = (samples[y * width + x]! - mean) * across[x]! * down[y]!
    }
    forward.forward(window, spectrum, 0, height - 1)
  }
  load(guide.samples)
  // Band: structure between about 1/6 of the field and the binned pixel.
  const wide = Math.max(2, Math.min(width, height) / 12)
  for (let kx = 0, o = 0; kx <= cut; kx++) {
    for (let ky = -cut; ky <= cut; ky++, o += 2) {
      const f = (kx * kx + ky * ky) / (size * size)
      const low = 1 - steadyExp(-2 * Math.PI * Math.PI * wide * wide * f)
      const weight = low * low * steadyExp(-2 * Math.PI * Math.PI * 0.64 * f)
      pattern[o] = spectrum[o]! * weight
      pattern[o + 1] = -spectrum[o + 1]! * weight
    }
  }
  return {
    shift(frame, out) {
      fillBlocks(frame, frameWidth, blocks)
      load(blocks.means)
      for (let o = 0; o < spectrum.length; o += 2) {
        const re = spectrum[o]!
        const im = spectrum[o + 1]!
        spectrum[o] = re * pattern[o]! - im * pattern[o + 1]!
        spectrum[o + 1] = re * pattern[o + 1]! + im * pattern[o]!
      }
      inverse.inverse(spectrum, map)
      const side = inverse.side
      // Zero shift to the middle, so that the peak's neighbours lie around it.
      let squares = 0
      for (let y = 0; y < side; y++) {
        const to = ((y + side / 2) % side) * side
        for (let x = 0; x < side; x++) {
          const v = map[y * side + x]!
          turned[to + (x + side / 2) % side] = v
          squares += v * v
        }
      }
      let best = side + 1
      for (let y = 1; y < side - 1; y++) {
        for (let i = y * side + 1; i < (y + 1) * side - 1; i++) if (turned[i]! > turned[best]!) best = i
      }
      quadraticAt(turned, side, best, peak)
      const step = bin * size / side
      out.x = (peak.x - side / 2) * step
      out.y = (peak.y - side / 2) * step
      out.strength = squares > 0 ? peak.value / Math.sqrt(squares / (side * side)) : 0
    },
  }
}
