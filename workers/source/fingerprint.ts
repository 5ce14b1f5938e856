import { canonicalJson, sha256Hex } from '../../shared/recipe/canonical'
import type { ByteSource } from './types'

const BLOCK = 64 * 1024
/** Blocks that are hashed of each file: the first, the last and some between. */
const BLOCKS_ONE_FILE = 16
/** Of a folder of many files only so many are looked into; all sizes count. */
const FILES_SAMPLED = 32

/** `count` numbers from 0 to last, first and last included, evenly spread, ascending, without repeats. */
function spread(count: number, last: number): number[] {
  if (last <= 0) return [0]
  const steps = Math.min(count - 1, last)
  return Array.from({ length: steps + 1 }, (_, i) => Math.floor(i * last / steps))
}

/**
 * Names a capture by its bytes: SHA-256 over the sizes of its files and over blocks spread through them. It does
 * not depend on names or places, and costs the same for 10 GB as for 10 MB (about a megabyte is read).
 */
export async function fingerprintOf(sources: ByteSource[], signal?: AbortSignal): Promise<string> {
  const perFile = sources.length === 1 ? BLOCKS_ONE_FILE : 2
  const blocks: string[] = []
  for (const index of spread(FILES_SAMPLED, sources.length - 1)) {
    const source = sources[index]!
    for (const block of spread(perFile, Math.ceil(source.size / BLOCK) - 1)) {
      const offset = block * BLOCK
      blocks.push(await sha256Hex(await source.read(offset, Math.max(0, Math.min(BLOCK, source.size - offset)), signal)))
    }
  }
  return sha256Hex(canonicalJson({ sizes: sources.map(source => source.size), blocks }))
}
