/** What plans of an input are worth on a plant whose answer to it is known exactly: right plans, and wrong ones. */
import { FIT_DEFAULTS, fit as fitHistory } from '@stillwell/trainer';
import { meanOf } from './accuracy-errors.ts';
import type { BenchOptions, Row } from './harness.ts';
import { isWanted, row } from './harness.ts';
import { leastError, plannedHistory } from './planned-plant.ts';

const TICKS = 8000;
const SEEDS = [31, 32, 33, 34] as const;

/** Told what comes: error over the least possible. No plan, and a wrong one: error over that of being told. */
export async function* planRows(options: BenchOptions): AsyncIterable<Row> {
  if (!isWanted(options, 'planned plant')) return;
  const told: number[] = [];
  const gain: number[] = [];
  const wrong: number[] = [];
  for (const seed of SEEDS) {
    const { model, planWorth } = await fitHistory(plannedHistory(TICKS, seed), FIT_DEFAULTS);
    if (planWorth === null) throw new Error(`planned plant, seed ${seed}: plans changed nothing`);
    const [none, perfect, other] = (['none', 'perfect', 'wrong'] as const).map(
      (trial) => planWorth.trials[trial].mean[0]!,
    );
    told.push((perfect! * model.scale[0]! ** 2) / leastError());
    gain.push(perfect! / none!);
    wrong.push(other! / none!);
  }
  options.note(`planned plant: under a wrong plan the error is ${meanOf(wrong).toPrecision(3)} times that without one`);
  const common = { suite: 'accuracy', peer: null, peerName: null, better: 'lower' } as const;
  yield row({
    ...common,
    case: `planned plant, ${TICKS} ticks, told what comes, mse over the least possible`,
    unit: 'mse ratio',
    ours: meanOf(told),
    bar: 1.2,
  });
  yield row({
    ...common,
    case: `planned plant, ${TICKS} ticks, told what comes, mse over that without a plan`,
    unit: 'mse ratio',
    ours: meanOf(gain),
    bar: 0.2,
  });
}
