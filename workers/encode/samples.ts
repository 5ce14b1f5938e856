/** Float samples of a stack as integers for image files. */
import type { DisplayStretch } from '../../shared/schemas/run'

/** Planar float samples → interleaved 16 bit, `low` at 0 and `high` at 65535, linear, rounded, clamped. */
export function toUint16(samples: Float32Array, pixels: number, planes: 1 | 3, low: number, high: number): Uint16Array<ArrayBuffer> {
  const out = new Uint16Array(pixels * planes)
  const scale = high > low ? 65_535 / (high - low) : 0
  for (let p = 0; p < planes; p++) {
    for (let i = 0; i < pixels; i++) {
      const value = (samples[p * pixels + i]! - low) * scale
      out[i * planes + p] = value <= 0 ? 0 : value >= 65_535 ? 65_535 : Math.round(value)
    }
  }
  return out
}

/** Planar float samples → interleaved 8 bit as displayed: black to white through the exponent 1 / gamma. */
export function toDisplay8(samples: Float32Array, pixels: number, planes: 1 | 3, { black, white, gamma }: DisplayStretch): Uint8Array<ArrayBuffer> {
  const out = new Uint8Array(pixels * planes)
  const scale = white > black ? 1 / (white - black) : 0
  for (let p = 0; p < planes; p++) {
    for (let i = 0; i < pixels; i++) {
      const value = Math.min(1, Math.max(0, (samples[p * pixels + i]! - black) * scale))
      out[i * planes + p] = Math.round(255 * value ** (1 / gamma))
    }
  }
  return out
}
