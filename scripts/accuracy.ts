/**
 * How near the core comes to the truth: `npm run accuracy -- DIR`.
 *
 * DIR holds captures, each with NAME.truth.json beside it (per-frame Strehl ratio, drift, brightest point and tilt of the
 * point-spread function; see accuracy/truth.ts). Without DIR, rehearsals are simulated on the spot, some of them as the
 * demo shows them and some with bad luck built in. Each capture goes through the same engine as on the bench, at the
 * default recipe, and every line says what it is compared with and where that figure comes from.
 */
import { judgeCapture } from './accuracy/judge'
import { blankRows, rehearsalTruths } from './accuracy/rehearsals'
import { printRows, type Row } from './accuracy/rows'
import { sampleTruths } from './accuracy/truth'

const only = process.argv.slice(3)
const dir = process.argv[2]
const rows: Row[] = []
for await (const known of dir ? sampleTruths(dir) : rehearsalTruths()) {
  if (only.length > 0 && !only.some(word => known.name.includes(word))) continue
  try {
    rows.push(...await judgeCapture(known))
  }
  catch (error) {
    rows.push({ capture: known.name, what: 'could not be judged', value: NaN, digits: 0, reference: null, source: error instanceof Error ? error.message : String(error), want: 'none' })
  }
}
if (only.length === 0) rows.push(...await blankRows())
printRows(rows)
