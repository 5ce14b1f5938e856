/** Entry of the core for filed runs: hands calls to GuestRun and transfers what it answers. */
import { expose, transfer } from 'comlink'
import type { GuestApi, StackImage } from './api'
import { GuestRun } from './run/guest'

const run = new GuestRun()
const handOver = <T extends StackImage | null>(image: T): T => image ? transfer(image, [image.samples.buffer as ArrayBuffer]) : image

expose({
  open: filed => run.open(filed),
  stack: async (count, restored) => handOver(await run.stack(count, restored)),
  figures: count => run.figures(count),
  average: async () => handOver(await run.average()),
  close: () => run.close(),
  alive: () => run.alive(),
} satisfies GuestApi)
