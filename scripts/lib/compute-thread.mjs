// Entry of a compute thread. TypeScript is registered here: Node 20 does not pass a loader on to its threads.
import { register } from 'tsx/esm/api'

register()
await import('./compute-thread.ts')
