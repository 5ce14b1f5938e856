/** Captures for timing: a double star of speckles that wanders over a noisy field, written as SER and never kept. */
import { createHash } from 'node:crypto'
import { open } from 'node:fs/promises'
import { serHeader } from '../../workers/rehearse/ser'
import { createRandom } from './random'

export interface BenchCapture { file: string, width: number, height: number, frames: number, /** Bytes before the first frame. */ offset: number, hash: string }

const HEADER = 178
/** Different fields of noise; each frame takes one, from a place of its own. */
const FIELDS = 8
const SPECKLES = 9
const HOT = 12

/** Writes a capture of 16-bit frames. The same numbers on every machine. */
export async function writeCapture(file: string, width: number, height: number, frames: number, seed = 11): Promise<BenchCapture> {
  const random = createRandom(seed)
  const size = width * height
  const noise = Uint16Array.from({ length: FIELDS * size }, () => Math.max(0, Math.round(900 + 40 * random.normal())))
  const hot = Array.from({ length: HOT }, () => Math.floor(random.uniform() * size))
  const frame = new Uint16Array(size)
  const handle = await open(file, 'w')
  const hash = createHash('sha256')
  try {
    await handle.write(serHeader({ width, height, bitDepth: 16, frames, mosaic: 'none', startMs: Date.UTC(2026, 10, 14, 20, 0, 0), names: { observer: '', instrument: 'Generated', telescope: 'Generated' } }))
    for (let i = 0; i < frames; i++) {
      const from = Math.floor(random.uniform() * (FIELDS - 1) * size)
      frame.set(noise.subarray(from, from + size))
      paintDouble(frame, width, height, i / frames, random)
      for (const pixel of hot) frame[pixel] = 22_000
      const bytes = new Uint8Array(frame.buffer)
      hash.update(bytes.subarray(0, 64))
      await handle.write(bytes)
    }
  }
  finally {
    await handle.close()
  }
  return { file, width, height, frames, offset: HEADER, hash: hash.digest('hex') }
}

/** A blob of speckles twice, at the separation of the pair; how far they spread is the frame's quality. */
function paintDouble(frame: Uint16Array, width: number, height: number, time: number, random: ReturnType<typeof createRandom>): void {
  const x = width / 2 + 6 * (time - 0.5) + 2 * random.normal()
  const y = height / 2 + 2 * random.normal()
  const spread = 1 + 5 * random.uniform()
  for (let s = 0; s < SPECKLES; s++) {
    const dx = s === 0 ? 0 : spread * random.normal()
    const dy = s === 0 ? 0 : spread * random.normal()
    const light = s === 0 ? 14_000 / (1 + 0.3 * spread) : 2500 * random.uniform()
    paint(frame, width, height, x + dx, y + dy, light)
    paint(frame, width, height, x + dx + 9, y + dy - 5, 0.55 * light)
  }
}

function paint(frame: Uint16Array, width: number, height: number, x: number, y: number, light: number): void {
  const sigma = 1.5
  const reach = 6
  for (let j = Math.max(0, Math.round(y) - reach); j <= Math.min(height - 1, Math.round(y) + reach); j++) {
    for (let i = Math.max(0, Math.round(x) - reach); i <= Math.min(width - 1, Math.round(x) + reach); i++) {
      const value = frame[j * width + i]! + light * Math.exp(-((i - x) ** 2 + (j - y) ** 2) / (2 * sigma * sigma))
      frame[j * width + i] = Math.min(65_535, value)
    }
  }
}
