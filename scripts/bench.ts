/**
 * `npm run bench`: speed of the core, one JSON line a figure. Options: --against-scipy interleaves the SciPy/OpenCV pipeline on
 * the same files; --runs N (5), --frames N (2000), --sizes 128x128,256x256,640x480, --workers N (2).
 * Ratios within one run can be trusted; absolute figures are this machine's at this hour, and `noise` says by how much they vary.
 */
import { mkdtemp, rm } from 'node:fs/promises'
import { cpus, loadavg, tmpdir } from 'node:os'
import { join } from 'node:path'
import { parseArgs } from 'node:util'
import { writeCapture } from './bench/capture'
import { compare } from './bench/compare'
import { say } from './bench/figures'

const { values } = parseArgs({
  options: {
    'against-scipy': { type: 'boolean' }, 'runs': { type: 'string', default: '5' }, 'frames': { type: 'string', default: '2000' },
    'sizes': { type: 'string', default: '128x128,256x256,640x480' }, 'workers': { type: 'string', default: '2' },
  },
})
const folder = await mkdtemp(join(tmpdir(), 'lull-bench-'))
try {
  say({ figure: 'machine', processors: cpus().length, model: cpus()[0]?.model ?? '', load: loadavg()[0]!, node: process.version })
  for (const size of values.sizes.split(',')) {
    const [width = 0, height = 0] = size.split('x').map(Number)
    const capture = await writeCapture(join(folder, `${size}.ser`), width, height, Number(values.frames))
    await compare(capture, { runs: Number(values.runs), workers: Number(values.workers), scipy: values['against-scipy'] ?? false })
    await rm(capture.file)
  }
}
finally {
  await rm(folder, { recursive: true, force: true })
}
