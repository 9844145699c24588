/**
 * The kernels at their sizes: how many operations a second beside NumPy and SciPy on one thread, and which share of the peak of one
 * core as WebAssembly reaches it, beside the same loops in plain numbers. All times are of the processor, least of several, so
 * that a busy machine does not change what is compared.
 */
import { spawnSync } from 'node:child_process';
import { fileURLToPath } from 'node:url';
import { createKernels, type Kernels } from '@stillwell/trainer';
import { type BenchOptions, type Row, row } from './harness.ts';
import { COUNTED_BY_VALUE, KERNEL_CASES, type KernelCase } from './kernels-cases.ts';
import { peakLoop } from './kernels-peak.ts';

const SCRIPT = fileURLToPath(new URL('../peers/kernels.py', import.meta.url));
const MEMORY = 200e6;
const LEAST_SECONDS = 0.02;
const REPEATS = 5;
const MOST_WAITED_MS = 300_000;

interface Timed {
  readonly seconds: number;
  readonly who: string;
}

/** Rows of the group. */
export async function* kernelRows(options: BenchOptions): AsyncIterable<Row> {
  const peers = peerTimes(KERNEL_CASES, options);
  const peak = peakRate();
  yield row({ suite: 'training', case: 'kernels: peak of one core', unit: 'GFLOP/s', ours: peak, better: 'higher' });
  for (const one of KERNEL_CASES) {
    const isValues = COUNTED_BY_VALUE.some((word) => one.name.startsWith(word));
    const rate = rateOf(one, 'simd');
    const peer = one.peer === null ? undefined : peers.get(one.peer);
    yield row({
      suite: 'training',
      case: `kernels: ${one.name}`,
      unit: isValues ? '1e9 values/s' : 'GFLOP/s',
      ours: rate,
      better: 'higher',
      peer: peer === undefined ? null : one.operations / peer.seconds / 1e9,
      peerName: peer === undefined ? null : `${peer.who}, one thread`,
    });
    const plain = rateOf(one, 'scalar');
    yield row({
      suite: 'training',
      case: `kernels: ${one.name}, ${isValues ? 'per operation' : 'share'} of the peak`,
      unit: '%',
      ours: (100 * rate) / peak,
      better: 'higher',
      peer: (100 * plain) / peak,
      peerName: 'the same loops in plain numbers',
    });
    // A row is shown before the next is measured.
    await new Promise((resolve) => setImmediate(resolve));
  }
}

function peakRate(): number {
  const { run, operations } = peakLoop();
  return operations / leastSeconds(run) / 1e9;
}

function rateOf(one: KernelCase, mode: 'simd' | 'scalar'): number {
  const kernels: Kernels = createKernels(MEMORY, mode);
  return one.operations / leastSeconds(one.prepare(kernels)) / 1e9;
}

/** Least seconds of a run, over runs long enough for the clock. */
function leastSeconds(work: () => void): number {
  let times = 1;
  work();
  for (; secondsOf(work, times) < LEAST_SECONDS; ) times *= 2;
  let least = Number.POSITIVE_INFINITY;
  for (let i = 0; i < REPEATS; i++) least = Math.min(least, secondsOf(work, times) / times);
  return least;
}

function secondsOf(work: () => void, times: number): number {
  const before = process.cpuUsage();
  for (let i = 0; i < times; i++) work();
  const { user, system } = process.cpuUsage(before);
  return (user + system) / 1e6;
}

/** By a case's name for its peer; what could not be run is left out, with a note. */
function peerTimes(cases: readonly KernelCase[], options: BenchOptions): ReadonlyMap<string, Timed> {
  const names = [...new Set(cases.flatMap(({ peer }) => (peer === null ? [] : [peer])))];
  const ended = spawnSync('/usr/bin/python3', ['-B', SCRIPT], {
    input: `${names.join('\n')}\n`,
    encoding: 'utf8',
    env: { ...process.env, OMP_NUM_THREADS: '1', OPENBLAS_NUM_THREADS: '1' },
    timeout: MOST_WAITED_MS,
  });
  if (ended.status !== 0) {
    const why = ended.error?.message ?? ended.stderr.trim().split('\n').at(-1);
    options.note(
      `kernels: no peer to the end (${why}); Debian packages python3-numpy python3-scipy libopenblas0-pthread`,
    );
  }
  const lines = (ended.stdout ?? '').split('\n').filter((line) => line.split('\t').length === 3);
  return new Map(
    lines.map((line) => {
      const [name, seconds, who] = line.split('\t') as [string, string, string];
      return [name, { seconds: Number(seconds), who }];
    }),
  );
}
