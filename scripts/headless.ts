/**
 * Runs a capture through a recipe without a browser:
 *   npm run --silent headless -- CAPTURE --out DIR [--recipe FILE.json] [--keep 0.1] [--set path=value …] [--workers N]
 * Exit code 0, or 2 with one plain line on stderr for bad input; then nothing is written.
 */
import { run } from './lib/headless-run'
import { InputError } from './lib/headless-input'

try {
  await run(process.argv.slice(2))
  process.exit(0)
}
catch (reason) {
  const known = reason instanceof InputError || (reason instanceof Error && reason.name === 'CaptureError')
  console.error(known ? (reason as Error).message.replace(/\s+/g, ' ') : reason)
  process.exit(known ? 2 : 1)
}
