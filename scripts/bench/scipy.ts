/** The reference pipeline as a warm process that answers one run a line. */
import { spawn } from 'node:child_process'
import { createInterface } from 'node:readline'
import { fileURLToPath } from 'node:url'
import type { BenchCapture } from './capture'

export interface ScipyRun { seconds: number, passes: Record<string, number>, checksum: number, dx: number[], dy: number[] }
export interface Scipy { run(capture: BenchCapture, windowPx: number, blurPx: number): Promise<ScipyRun>, end(): void }

/** Debian's Python has the libraries; another one on the path may not. */
const PYTHON = process.env.LULL_PYTHON ?? '/usr/bin/python3'

export async function startScipy(processes: number): Promise<Scipy> {
  const child = spawn(PYTHON, [fileURLToPath(new URL('../../tests/reference/pipeline.py', import.meta.url)), String(processes)], { stdio: ['pipe', 'pipe', 'inherit'] })
  const lines = createInterface({ input: child.stdout })[Symbol.asyncIterator]()
  const answer = async () => {
    const { value, done } = await lines.next()
    if (done) throw new Error('The reference pipeline stopped. It needs Debian\'s python3-scipy, python3-opencv and python3-skimage: apt-get install them, and start again.')
    return JSON.parse(value) as unknown
  }
  child.on('error', () => undefined)
  await answer()
  return {
    async run({ file, offset, width, height, frames }, windowPx, blurPx) {
      child.stdin.write(`${JSON.stringify({ file, offset, width, height, frames, window: windowPx, blur: blurPx })}\n`)
      return await answer() as ScipyRun
    },
    end: () => child.stdin.end(),
  }
}
