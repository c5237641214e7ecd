// A store worker that opens, and dies at the next request.
import { parentPort } from 'node:worker_threads';

parentPort.on('message', ({ id, op }) => {
  if (op === 'open')
    parentPort.postMessage({ id, ok: true, value: { storeId: 'aaaaaa', nextN: 1, runS: 0 } });
  else throw new Error('out of luck');
});
