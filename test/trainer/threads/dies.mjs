/** A second thread that leaves at the first request. */
import { parentPort } from 'node:worker_threads';

parentPort.on('message', () => process.exit(7));
