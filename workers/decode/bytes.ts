/** Small tools over bytes. */

export const machineIsLittleEndian = new Uint8Array(new Uint16Array([1]).buffer)[0] === 1

/** Swaps the two bytes of each of `count` 16-bit samples in place. */
export function swap16(samples: Uint16Array): void {
  for (let i = 0; i < samples.length; i++) {
    const v = samples[i]!
    samples[i] = (v >> 8) | ((v & 255) << 8)
  }
}

/** Text of a fixed-length field: up to the first NUL, printable Latin-1 only, trimmed. */
export function fieldText(bytes: Uint8Array): string {
  let text = ''
  for (const byte of bytes) {
    if (byte === 0) break
    text += (byte >= 32 && byte < 127) || byte >= 160 ? String.fromCharCode(byte) : ' '
  }
  return text.trim()
}

/** Interleaved colour of one frame to planes. `order` names the sample of a pixel that is red, green and blue. */
export function deinterleave<T extends Uint8Array | Uint16Array | Float32Array>(from: T, fromOffset: number, to: T, toOffset: number, pixels: number, samplesPerPixel: number, order: readonly [number, number, number]): void {
  for (let plane = 0; plane < 3; plane++) {
    let source = fromOffset + order[plane]!
    const start = toOffset + plane * pixels
    for (let i = 0; i < pixels; i++, source += samplesPerPixel) to[start + i] = from[source]!
  }
}
