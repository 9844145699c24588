/**
 * Reads a long history in a process of its own and, where asked to, sends that process signals, all at once, at an early
 * chunk handed on. Prints what came of it as JSON.
 *
 *   node interrupt-child.mjs HISTORY PLACE [SIGNAL…]
 */
import { INTERRUPTED_CODE, Interrupted } from '../../../trainer/dist/history/interrupt.js';
import { loadLong } from '../../../trainer/dist/history/long.js';

const [history, resumeFile, ...asked] = process.argv.slice(2);
const limits = { longFrom: 96, recentTicks: 64, chunkTicks: 16, blockBytes: 256 };
const plain = { payload: { kind: 'number' }, unit: '1', resolution: null, range: null, aggregate: 'last' };
const asSent = { sentIn: null, scale: 1, offset: 0, wrapsAt: null };
const none = { highHigh: null, high: null, low: null, lowLow: null };
const signals = ['level', 'flow'].map((name) => ({
  name,
  topic: name,
  column: name,
  limits: none,
  ...plain,
  ...asSent,
}));
const site = {
  site: 'test',
  timeZone: 'UTC',
  tickMs: 60_000,
  horizon: 24,
  latenessMs: 0,
  signals,
  inputs: [],
  exclude: [],
};
const said = [];
let chunks = 0;
const sink = {
  take: () => {
    if (chunks++ === 2) for (const signal of asked) process.kill(process.pid, signal);
  },
  snapshot: () => Uint8Array.of(chunks),
  restore: ([count]) => {
    chunks = count;
  },
};
try {
  const options = { zone: null, limits, resumeFile, say: (sentence) => said.push(sentence) };
  const { older, series, done } = await loadLong([history], site, options, () => sink);
  done();
  const hex = (bytes) => Buffer.from(bytes).toString('hex');
  console.log(JSON.stringify({ said, chunks, older: hex(older.digest), newest: hex(series.digest) }));
} catch (cause) {
  if (!(cause instanceof Interrupted)) throw cause;
  console.log(JSON.stringify({ message: cause.message }));
  process.exitCode = INTERRUPTED_CODE;
}
