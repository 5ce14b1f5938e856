/**
 * Whether the errors of measures are true: `npm run measure-accuracy -- [FROM] [TO] [--lines FILE]`.
 *
 * Rehearsed pairs (cases FROM to TO − 1, by default 0 to 20) go through the engine at the default recipe and are measured
 * without hints. A pull is the difference from the truth over the stated error. Cases can be run in parts: with --lines each
 * case is appended to a file, one JSON object a line, and the table covers all lines of the file.
 */
import { appendFile, readFile } from 'node:fs/promises'
import { parseArgs } from 'node:util'
import { measureCase, type CaseLine } from './measure-accuracy/cases'
import { pullTable } from './measure-accuracy/table'

const { values, positionals } = parseArgs({ allowPositionals: true, options: { lines: { type: 'string' } } })
const from = Number(positionals[0] ?? 0)
const to = Number(positionals[1] ?? from + 20)
if (!Number.isInteger(from) || !Number.isInteger(to) || from < 0 || to < from) {
  console.error('FROM and TO must be whole numbers, FROM the smaller. Usage: npm run measure-accuracy -- [FROM] [TO] [--lines FILE]')
  process.exit(2)
}
const lines: CaseLine[] = []
for (let index = from; index < to; index++) {
  const line = await measureCase(index)
  lines.push(line)
  if (values.lines) await appendFile(values.lines, `${JSON.stringify(line)}\n`)
}
const all = values.lines ? (await readFile(values.lines, 'utf8')).trim().split('\n').map(text => JSON.parse(text) as CaseLine) : lines
console.log(pullTable(all))
