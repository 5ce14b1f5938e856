import { parentPort } from 'node:worker_threads'
import { serveComputer } from '../../workers/run/pool'

parentPort!.on('message', serveComputer((message, transfer) => parentPort!.postMessage(message, transfer)))
