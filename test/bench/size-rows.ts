/** Sizing held against what came: shapes that no constant was fitted on, by the real commands. */
import { type BenchOptions, type Row, row } from './harness.ts';
import { condensePeak } from './size-frames.ts';
import type { SizeShape } from './size-plant.ts';
import { runShape, type SizeRun } from './size-runs.ts';

const SHAPES: readonly SizeShape[] = [
  { signals: 2, ticks: 10_000, horizon: 24 },
  { signals: 8, ticks: 10_000, horizon: 60 },
  { signals: 24, ticks: 10_000, horizon: 24 },
  { signals: 2, ticks: 64_000, horizon: 60 },
  { signals: 8, ticks: 64_000, horizon: 24 },
  { signals: 24, ticks: 64_000, horizon: 24 },
  { signals: 2, ticks: 1_000_000, horizon: 24 },
  { signals: 8, ticks: 1_000_000, horizon: 60 },
  { signals: 8, ticks: 1_000_000, horizon: 24, isParquet: true },
];
/** Foreseen within 25 %, either way. */
const BAR = 1.25;
const REPEATS = 2;

/** Rows of the group: by how much the foreseen is off, as the larger over the smaller. */
export async function* sizeRows({ note }: BenchOptions): AsyncIterable<Row> {
  for (const shape of SHAPES) {
    const run = await runShape(shape, REPEATS);
    const name = `${shape.ticks.toLocaleString('en')} x ${shape.signals}, horizon ${shape.horizon}${shape.isParquet === true ? ', Parquet' : ''}`;
    note(`size: ${name}: ${wordsOf(run)}`);
    const { fit } = run.foreseen;
    yield off(`size: peak memory, ${name}`, fit.peakBytes, run.peakBytes);
    yield off(`size: time, ${name}`, fit.seconds, run.seconds);
    yield off(`size: bundle, ${name}`, fit.bundleBytes, run.bundleBytes);
    if (run.factorsBytes !== null && fit.factorsBytes !== null)
      yield off(`size: factors, ${name}`, fit.factorsBytes, run.factorsBytes);
  }
  const { foreseen, came } = await condensePeak();
  yield off('size: peak memory, condensing 6,000 frames of 2,000', foreseen, came);
}

function off(name: string, foreseen: number, came: number): Row {
  const factor = Math.max(foreseen / came, came / foreseen);
  return row({ suite: 'training', case: name, unit: 'times off', ours: factor, better: 'lower', bar: BAR });
}

function wordsOf({ foreseen: { fit }, seconds, peakBytes, bundleBytes }: SizeRun): string {
  const mb = (bytes: number): string => `${(bytes / 1e6).toFixed(0)} MB`;
  return (
    `foreseen ${fit.seconds.toFixed(1)} s, ${mb(fit.peakBytes)}, bundle ${fit.bundleBytes}; ` +
    `came ${seconds.toFixed(1)} s, ${mb(peakBytes)}, bundle ${bundleBytes}`
  );
}
