/** One timed run of the core in Node. */
import { cpuUsage, memoryUsage } from 'node:process'
import { stat } from 'node:fs/promises'
import { basename } from 'node:path'
import { defaultRecipe } from '../../shared/schemas/recipe'
import type { Pass } from '../../workers/api'
import { openCapture } from '../../workers/decode/index'
import { Engine } from '../../workers/run/engine'
import type { Pool } from '../../workers/run/pool'
import { fileSource } from '../lib/file-source'
import type { BenchCapture } from './capture'

/** Bytes of decoded frames that are kept, as in the browser. */
const BUDGET = 512 * 2 ** 20

export interface CoreRun {
  /** From opening the file to the exact stack of the best 10 % on the screen; the whole ladder is made by then. */
  seconds: number
  /** To the end of the run: all proofs with their figures. */
  wholeSeconds: number
  passes: Partial<Record<Pass, number>>
  cpuMsPerFrame: number
  residentMb: number
  windowPx: number
  blurPx: number
  dx: number[]
  dy: number[]
}

export async function coreRun(capture: BenchCapture, pool: Pool): Promise<CoreRun> {
  const passes: Partial<Record<Pass, number>> = {}
  const cpu = cpuUsage()
  const began = performance.now()
  const source = fileSource(capture.file, basename(capture.file), (await stat(capture.file)).size)
  const engine = new Engine(await openCapture(source.name, [source]), { pool, budgetBytes: BUDGET })
  try {
    let seconds = Number.NaN
    const state = await engine.run(defaultRecipe, null, (event) => {
      if (event.kind === 'timing') passes[event.pass] = event.ms / 1000
      if (event.kind === 'proof' && event.fraction === 0.1) seconds = (performance.now() - began) / 1000
    }, new AbortController().signal)
    const wholeSeconds = (performance.now() - began) / 1000
    const used = cpuUsage(cpu)
    return {
      seconds, wholeSeconds, passes, cpuMsPerFrame: (used.user + used.system) / 1000 / capture.frames, residentMb: memoryUsage().rss / 2 ** 20,
      windowPx: state.surveyed.score.windowPx, blurPx: state.surveyed.score.blurPx,
      dx: [...state.refined.shifts.dx], dy: [...state.refined.shifts.dy],
    }
  }
  finally {
    engine.close()
    await source.close()
  }
}
