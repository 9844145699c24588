/**
 * A million ticks from a Parquet file to a sealed bundle by the real commands, beside what one would write with NumPy for the same
 * bank and beside two reference libraries on the same rows; and the most memory that fit holds.
 */
import { statSync, writeFileSync } from 'node:fs';
import { join } from 'node:path';
import { designBank, featureCount } from '@stillwell/trainer';
import { type BenchOptions, type Row, row } from './harness.ts';
import { ARRAY_HEADER_BYTES, writePlant } from './training-files.ts';
import { HORIZON, SIGNAL_COUNT } from './training-plant.ts';
import { FailedRun, measure, median, peerCommand, STILLWELL } from './training-process.ts';
import { profileSummary } from './training-profile.ts';
import { fitAndSeal, fitCommand, inWorkshop, type Sealed, stepsOf, type Workshop } from './training-runs.ts';

const MILLION = 1_000_000;
const REPEATS = 3;
const BARS = { ridge: 0.5, library: 0.2, peakMb: 400 };
/** Penalty of the peer's ridge, rows' worth on features of unit variance: a middling one of those we choose among. */
const PENALTY = 300;
const VAR_LAGS = 24;
/** As many block rows as the autoregression has lags; of higher orders its routine fails on such rows. */
const BLOCK_ROWS = 24;
const SUBSPACE_ORDER = 8;

interface Peer {
  readonly name: string;
  readonly bar: number;
  readonly debian: string;
  readonly command: readonly string[];
}

/** Rows of the group. */
export function historyRows(options: BenchOptions): AsyncIterable<Row> {
  return inWorkshop(options, async function* (workshop) {
    const files = { parquet: join(workshop.folder, 'million.parquet'), array: join(workshop.folder, 'million.npy') };
    await writePlant(files, MILLION);
    const megabytes = (statSync(files.parquet).size / 1e6).toFixed(0);
    options.note(`plant: ${MILLION} ticks x ${SIGNAL_COUNT}, ${megabytes} MB of Parquet`);
    yield* rowsOf(options, workshop, files);
  });
}

/** Ours and the peers in turn, so that whatever else the machine does meets all of them. */
async function* rowsOf(
  options: BenchOptions,
  workshop: Workshop,
  files: { readonly parquet: string; readonly array: string },
): AsyncIterable<Row> {
  const ours: Sealed[] = [await fitAndSeal(workshop, [files.parquet], 'fit')];
  const peers = peersOf(workshop, files.array, ours[0]!.said.chosen.periodTicks);
  const seconds = new Map<string, number[]>();
  for (let k = 0; k < REPEATS; k++) {
    if (k > 0) ours.push(await fitAndSeal(workshop, [files.parquet], 'fit'));
    for (const peer of peers) {
      if (k > 0 && !seconds.has(peer.name)) continue;
      const ran = await runPeer(options, peer);
      if (ran !== null) seconds.set(peer.name, [...(seconds.get(peer.name) ?? []), ran]);
    }
  }
  const { said } = ours[0]!;
  options.note(
    `${said.chosen.kind} of order ${said.chosen.order} on ${said.chosen.bank}, ${said.bytes} bytes, mean skill ${said.mean_skill.toFixed(3)}`,
  );
  options.note(stepsOf(ours[ours.length - 1]!));
  const time = median(ours.map((one) => one.seconds));
  for (const { name, bar } of peers) {
    const peer = seconds.get(name);
    yield row({
      suite: 'training',
      case: 'history: 1,000,000 x 8, Parquet to bundle',
      unit: 's',
      ours: time,
      better: 'lower',
      peer: peer === undefined ? null : median(peer),
      peerName: name,
      bar,
      barOnRatio: true,
    });
  }
  yield row({
    suite: 'training',
    case: 'history: peak memory of that fit',
    unit: 'MB',
    ours: median(ours.map((one) => one.peakMb)),
    better: 'lower',
    bar: BARS.peakMb,
  });
  if (options.profile !== null) await profile(options, workshop, files.parquet, options.profile);
}

function peersOf({ folder }: Workshop, array: string, periodTicks: number): Peer[] {
  const wish = { periodTicks, otherPeriods: [], horizon: HORIZON, learnTicks: MILLION, channelCount: SIGNAL_COUNT };
  const bank = designBank(wish);
  const bankFile = join(folder, 'bank.json');
  writeFileSync(bankFile, JSON.stringify({ ...bank, horizon: HORIZON, penalty: PENALTY }));
  const features = SIGNAL_COUNT * featureCount(bank);
  return [
    {
      name: `NumPy, SciPy: the same ${features} features, one ridge`,
      bar: BARS.ridge,
      debian: 'python3-scipy',
      command: peerCommand('bank_ridge.py', [array, bankFile, join(folder, 'map.npy')]),
    },
    {
      name: `statsmodels VAR(${VAR_LAGS}).fit`,
      bar: BARS.library,
      debian: 'python3-statsmodels',
      command: peerCommand('vector_autoregression.py', [array, String(VAR_LAGS), join(folder, 'var.npy')]),
    },
    {
      name: `Octave n4sid, ${BLOCK_ROWS} block rows, order ${SUBSPACE_ORDER}`,
      bar: BARS.library,
      debian: 'octave-control',
      command: peerCommand('subspace_long.m', [
        array,
        ...[ARRAY_HEADER_BYTES, SIGNAL_COUNT, BLOCK_ROWS, SUBSPACE_ORDER].map(String),
        join(folder, 'subspace.csv'),
      ]),
    },
  ];
}

/** Seconds, or null with a line that says why not. */
async function runPeer({ note }: BenchOptions, { name, debian, command }: Peer): Promise<number | null> {
  try {
    return (await measure(command)).seconds;
  } catch (error) {
    if (!(error instanceof FailedRun)) throw error;
    note(`${name} left out: ${error.message} (Debian package ${debian})`);
    return null;
  }
}

/** One more fit, watched by the engine's own profiler, so that the split is measured and no timing above pays for it. */
async function profile({ note }: BenchOptions, workshop: Workshop, parquet: string, folder: string): Promise<void> {
  const command = fitCommand(workshop, [parquet], join(workshop.folder, 'profiled'));
  await measure([process.execPath, '--cpu-prof', `--cpu-prof-dir=${folder}`, STILLWELL, ...command]);
  for (const line of profileSummary(folder)) note(line);
}
