/** Version of Lull that computed a run; kept equal to package.json by a test. */
export const lullVersion = '0.1.0'

/** What ran the arithmetic, in general words: browser engine and version, or Node's. */
export function engineName(): string {
  const process = (globalThis as { process?: { versions?: { node?: string } } }).process
  if (process?.versions?.node) return `Node ${process.versions.node}`
  const agent = globalThis.navigator?.userAgent ?? ''
  return /(?:Chrome|Firefox|Version)\/[\d.]+/.exec(agent)?.[0].replace('/', ' ') ?? 'a browser'
}
