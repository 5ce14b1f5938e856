/** Entry of a compute worker. */
import { serveComputer } from './run/pool'

const scope = self as unknown as { postMessage(message: unknown, transfer: ArrayBuffer[]): void, onmessage: ((event: MessageEvent) => void) | null }
const serve = serveComputer((message, transfer) => scope.postMessage(message, transfer))
scope.onmessage = event => serve(event.data)
