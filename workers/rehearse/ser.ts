/** A rehearsal as a SER file (published description, version 3, 2014), with its times in the trailer. */
import type { RehearsalSpec } from './spec'
import { createSimulator } from './simulator'

const HEADER_BYTES = 178
/** The fixed 14 bytes that the description asks for. */
const IDENTIFIER = [76, 85, 67, 65, 77, 45, 82, 69, 67, 79, 82, 68, 69, 82]
const COLOUR_IDS = { none: 0, RGGB: 8, GRBG: 9, GBRG: 10, BGGR: 11 } as const
/** 100 ns ticks from 0001-01-01 to 1970-01-01. */
const EPOCH_TICKS = 621355968000000000n

export interface SerNames { observer: string, instrument: string, telescope: string }

/** Ticks of a time, ms since 1970 UTC. */
function ticks(milliseconds: number): bigint {
  return EPOCH_TICKS + BigInt(Math.round(milliseconds * 10_000))
}

export interface SerHeader {
  width: number, height: number, bitDepth: number, frames: number, mosaic: RehearsalSpec['detector']['mosaic'], startMs: number, names: SerNames
}

/** The 178 bytes; names are cut to 40 ASCII characters. Samples follow little-endian, as the flag says. */
export function serHeader({ width, height, bitDepth, frames, mosaic, startMs, names }: SerHeader): Uint8Array<ArrayBuffer> {
  const bytes = new Uint8Array(HEADER_BYTES)
  const view = new DataView(bytes.buffer)
  bytes.set(IDENTIFIER)
  const numbers = [0, COLOUR_IDS[mosaic], 1, width, height, bitDepth, frames]
  numbers.forEach((value, i) => view.setInt32(14 + 4 * i, value, true))
  const texts = [names.observer, names.instrument, names.telescope]
  texts.forEach((text, i) => [...text].slice(0, 40).forEach((letter, j) => {
    const code = letter.charCodeAt(0)
    bytes[42 + 40 * i + j] = code >= 32 && code < 127 ? code : 63
  }))
  view.setBigInt64(162, ticks(startMs), true)
  view.setBigInt64(170, ticks(startMs), true)
  return bytes
}

/** The whole file in memory: header, frames, trailer of times. */
export function rehearsalSer(spec: RehearsalSpec, names: SerNames = { observer: '', instrument: 'Simulated detector', telescope: 'Simulated telescope' }): Uint8Array<ArrayBuffer> {
  const simulator = createSimulator(spec)
  const { width, height, frames, detector: { bitDepth, mosaic } } = spec
  const pixels = width * height
  const wide = bitDepth > 8
  const frameBytes = pixels * (wide ? 2 : 1)
  const startMs = Date.parse(spec.start)
  const file = new Uint8Array(HEADER_BYTES + frames * (frameBytes + 8))
  const view = new DataView(file.buffer)
  file.set(serHeader({ width, height, bitDepth, frames, mosaic, startMs, names }))
  const frame = wide ? new Uint16Array(pixels) : new Uint8Array(pixels)
  for (let i = 0, at = HEADER_BYTES; i < frames; i++) {
    simulator.render(i, frame, 0)
    if (wide) for (let j = 0; j < pixels; j++, at += 2) view.setUint16(at, frame[j]!, true)
    else {
      file.set(frame, at)
      at += pixels
    }
    view.setBigInt64(HEADER_BYTES + frames * frameBytes + 8 * i, ticks(startMs + 1000 * simulator.seconds[i]!), true)
  }
  return file
}
