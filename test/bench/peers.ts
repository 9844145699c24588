/**
 * Forecasts of reference libraries on a series of ours: each peer is a process of its own with a limit of processor time, given a folder with
 *
 *     case.csv      one fact a line: learn_ticks, fit_ticks, horizon, targets, periods
 *     values.csv    header, then one line a tick: the signals to forecast, then what else is known; NaN for a gap
 *     origins.csv   one line an origin: the last tick whose readings may be used, from 0
 *
 * and asked for a file with one line an origin and signal, holding its forecasts 1..horizon. Parameters come from the ticks
 * before fit_ticks alone. Scoring is done here, the same for all.
 */
import { spawn } from 'node:child_process';
import { existsSync, readFileSync, writeFileSync } from 'node:fs';
import { join } from 'node:path';
import { fileURLToPath } from 'node:url';
import type { DataCase } from './datasets.ts';

/** Where forecasts start and end: ticks from 0, the parts of a fit with its defaults. */
export interface PeerTask {
  readonly data: Pick<DataCase, 'signals' | 'inputs' | 'values' | 'horizon' | 'periods'>;
  readonly learnTicks: number;
  readonly fitTicks: number;
  readonly origins: readonly number[];
  readonly folder: string;
}

/** (origins × signals × horizon), or why there is none. */
export type PeerForecast = { readonly ahead: Float64Array } | { readonly failure: string };

interface Peer {
  readonly label: string;
  readonly command: readonly string[];
  readonly debian: string;
}

const SCRIPTS = fileURLToPath(new URL('../peers/', import.meta.url));
const PYTHON = '/usr/bin/python3';
/** Of processor time, so that a busy machine does not change what is compared. */
const MOST_SECONDS = 150;
/** Of the clock, for one that hangs. */
const MOST_WAITED_SECONDS = 1200;
const KEPT_ERROR = 300;

const python = (script: string): readonly string[] => [PYTHON, '-B', `${script}.py`];
const r = (method: string): readonly string[] => ['Rscript', '--vanilla', 'forecast.R', method];
const octave = (method: string): readonly string[] => ['octave-cli', '--norc', '--quiet', 'subspace.m', method];

/** By the names that data cases use. */
const PEERS: Readonly<Record<string, Peer>> = {
  autoregression: {
    label: 'statsmodels autoregression',
    command: python('autoregression'),
    debian: 'python3-statsmodels',
  },
  components: {
    label: 'statsmodels UnobservedComponents',
    command: python('components'),
    debian: 'python3-statsmodels',
  },
  boosting: { label: 'scikit-learn boosting', command: python('boosting'), debian: 'python3-sklearn' },
  arima: { label: 'R auto.arima', command: r('arima'), debian: 'r-cran-forecast' },
  ets: { label: 'R ets', command: r('ets'), debian: 'r-cran-forecast' },
  tbats: { label: 'R tbats', command: r('tbats'), debian: 'r-cran-forecast' },
  double: { label: 'R dshw', command: r('double'), debian: 'r-cran-forecast' },
  n4sid: { label: 'Octave n4sid', command: octave('n4sid'), debian: 'octave-control' },
  moen4: { label: 'Octave moen4', command: octave('moen4'), debian: 'octave-control' },
};

/** What to call a peer in print. */
export function peerLabel(name: string): string {
  return PEERS[name]!.label;
}

/** Lays a task out for `runPeer`. */
export function layOut({ data, learnTicks, fitTicks, origins, folder }: PeerTask): void {
  const facts = [
    `learn_ticks,${learnTicks}`,
    `fit_ticks,${fitTicks}`,
    `horizon,${data.horizon}`,
    `targets,${data.signals.length}`,
    `periods,${data.periods.join(',')}`,
  ];
  const rows = Array.from({ length: data.values[0]!.length }, (_, t) => data.values.map((y) => y[t]).join(','));
  writeFileSync(join(folder, 'case.csv'), `${facts.join('\n')}\n`);
  writeFileSync(join(folder, 'values.csv'), `${[...data.signals, ...data.inputs].join(',')}\n${rows.join('\n')}\n`);
  writeFileSync(join(folder, 'origins.csv'), `${origins.join('\n')}\n`);
}

/** Runs one peer on a task laid out before. Never throws: a peer's failure is its own. */
export async function runPeer(name: string, task: PeerTask): Promise<PeerForecast> {
  const { command, debian } = PEERS[name]!;
  const out = join(task.folder, `${name}.csv`);
  const [program, ...rest] = command;
  const at = rest.findIndex((word) => /\.(py|R|m)$/.test(word));
  const words = [...rest.slice(0, at), join(SCRIPTS, rest[at]!), task.folder, out, ...rest.slice(at + 1)];
  const ended = await run(program!, words);
  if (!existsSync(out)) return { failure: `${ended} (Debian package ${debian})` };
  const rows = readFileSync(out, 'utf8')
    .trim()
    .split('\n')
    .map((line) => line.split(',').map(Number));
  const wanted = task.origins.length * task.data.signals.length;
  if (rows.length !== wanted || rows.some((row) => row.length !== task.data.horizon))
    return { failure: `wrote ${rows.length} lines where ${wanted} of ${task.data.horizon} numbers were asked for` };
  const ahead = Float64Array.from(rows.flat());
  return ahead.every(Number.isFinite) ? { ahead } : { failure: 'forecast something that is no number' };
}

/** How a process ended, in words; one thread each, so that two of them share two cores. */
function run(program: string, words: readonly string[]): Promise<string> {
  return new Promise((resolve) => {
    const env = { ...process.env, OMP_NUM_THREADS: '1', OPENBLAS_NUM_THREADS: '1' };
    const limited = ['-c', `ulimit -t ${MOST_SECONDS}; exec "$@"`, 'peer', program, ...words];
    const child = spawn('/bin/sh', limited, { env, stdio: ['ignore', 'ignore', 'pipe'] });
    let error = '';
    let late = false;
    const limit = setTimeout(() => {
      late = true;
      child.kill('SIGKILL');
    }, MOST_WAITED_SECONDS * 1000);
    child.stderr.on('data', (bytes: Buffer) => {
      error = (error + bytes.toString('utf8')).slice(-4 * KEPT_ERROR);
    });
    child.on('error', (problem) => {
      clearTimeout(limit);
      resolve(problem.message);
    });
    child.on('close', (code, signal) => {
      clearTimeout(limit);
      const said = error.trim().replaceAll(/\s+/g, ' ').slice(-KEPT_ERROR);
      resolve(
        late ? `not done after ${MOST_SECONDS} s` : `ended with ${code ?? signal}${said === '' ? '' : `: ${said}`}`,
      );
    });
  });
}
