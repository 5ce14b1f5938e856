/** All figures of one frame size: Lull with its workers, Lull with one, and the reference pipeline, by turns. */
import type { Pass } from '../../workers/api'
import { nodePool } from '../lib/node-pool'
import type { BenchCapture } from './capture'
import { coreRun, type CoreRun } from './core'
import { median, noise, say } from './figures'
import { startScipy, type ScipyRun } from './scipy'

export interface HowToCompare { runs: number, workers: number, scipy: boolean }

export async function compare(capture: BenchCapture, { runs, workers, scipy }: HowToCompare): Promise<void> {
  const size = `${capture.width}x${capture.height}`
  const [many, one] = [nodePool(workers), nodePool(1)]
  const reference = scipy ? await startScipy(workers) : null
  const ours: CoreRun[] = []
  const alone: CoreRun[] = []
  const theirs: ScipyRun[] = []
  try {
    // The first of each warms engines and page cache and is not counted.
    for (let i = 0; i <= runs; i++) {
      const run = await coreRun(capture, many)
      const single = await coreRun(capture, one)
      const other = reference ? await reference.run(capture, run.windowPx, run.blurPx) : null
      if (i === 0) continue
      ours.push(run)
      alone.push(single)
      if (other) theirs.push(other)
    }
  }
  finally {
    many.end()
    one.end()
    reference?.end()
  }
  report(size, capture, workers, ours, alone)
  if (theirs.length > 0) ratio(size, capture, ours, theirs)
}

function report(size: string, { frames }: BenchCapture, workers: number, ours: CoreRun[], alone: CoreRun[]): void {
  const seconds = ours.map(run => run.seconds)
  say({ figure: `frames per second ${size}`, value: frames / median(seconds), noise: noise(seconds), workers, runs: ours.length, wholeRun: frames / median(ours.map(run => run.wholeSeconds)), windowPx: ours[0]!.windowPx })
  for (const pass of ['survey', 'grade', 'refine', 'ladder', 'proofs'] as Pass[]) {
    const times = ours.map(run => run.passes[pass] ?? Number.NaN)
    if (times.every(Number.isFinite)) say({ figure: `${pass} ${size}`, seconds: median(times), framesPerSecond: frames / median(times), noise: noise(times) })
  }
  say({ figure: `CPU per frame ${size}`, milliseconds: median(ours.map(run => run.cpuMsPerFrame)) })
  say({ figure: `memory ${size}`, residentMb: Math.max(...ours.map(run => run.residentMb)) })
  const gains = ours.map((run, i) => alone[i]!.seconds / run.seconds)
  say({ figure: `${workers} workers over one ${size}`, ratio: median(gains), noise: noise(gains) })
}

function ratio(size: string, { frames }: BenchCapture, ours: CoreRun[], theirs: ScipyRun[]): void {
  const ratios = ours.map((run, i) => theirs[i]!.seconds / run.seconds)
  const times = theirs.map(run => run.seconds)
  const last = theirs.at(-1)!
  const differences = last.dx.flatMap((dx, i) => [dx - ours[0]!.dx[i]!, last.dy[i]! - ours[0]!.dy[i]!])
  // Both lay the frames on grids of their own: the common offset does not count.
  const middles = [0, 1].map(axis => median(differences.filter((_, i) => i % 2 === axis)))
  const apart = differences.map((value, i) => Math.abs(value - middles[i % 2]!))
  say({ figure: `end to end ${size}`, ratio: median(ratios), noise: noise(ratios), lull: frames / median(ours.map(run => run.seconds)), scipy: frames / median(times), medianShiftDifferencePx: median(apart) })
}
