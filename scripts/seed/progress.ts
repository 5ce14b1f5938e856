/** One line that says how far the seeding is: rewritten on a terminal, one line a step elsewhere. */
export function createProgress(steps: number): { step(text: string): void, done(): void } {
  const started = Date.now()
  const terminal = process.stdout.isTTY
  let at = 0
  const seconds = () => ((Date.now() - started) / 1000).toFixed(0)
  return {
    step(text) {
      at++
      const line = `Seeding the demo, step ${at} of ${steps} (${seconds()} s): ${text}`
      process.stdout.write(terminal ? `\r\u001B[2K${line}` : `${line}\n`)
    },
    done() {
      process.stdout.write(`${terminal ? '\r\u001B[2K' : ''}The demo is seeded: ${steps - 2} runs, in ${seconds()} s.\n`)
    },
  }
}
