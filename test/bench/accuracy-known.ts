/** What is learned beside a known optimum: its error over the exact filter's falls to 1 as the history grows. */
import { mkdtempSync, rmSync } from 'node:fs';
import { tmpdir } from 'node:os';
import { join } from 'node:path';
import { FIT_DEFAULTS, fit as fitHistory } from '@stillwell/trainer';
import { errorCells, meanOf } from './accuracy-errors.ts';
import type { BenchOptions, Row } from './harness.ts';
import { isWanted, row } from './harness.ts';
import { HORIZON, type KnownPlant, knownPlant } from './known-plant.ts';
import { layOut, peerLabel, runPeer } from './peers.ts';

/** Ticks, bar, plants; short histories differ more. */
const SIZES = [
  [4000, 1.03, 8],
  [16_000, 1.01, 4],
] as const;
const FIRST_SEED = 5;
const PEERS = ['autoregression', 'n4sid'] as const;

/** A row a size: mean over seeds, beside the better peer's. */
export async function* knownRows(options: BenchOptions): AsyncIterable<Row> {
  if (!isWanted(options, 'known plant')) return;
  for (const [ticks, bar, count] of SIZES) {
    const plants = Array.from({ length: count }, (_, n) => knownPlant(ticks, FIRST_SEED + n));
    const ratios: number[] = [];
    for (const plant of plants) {
      const result = await fitHistory(plant.input, FIT_DEFAULTS);
      const optimum = plant.optimum(result.judged.fromTick - plant.input.series.firstTick);
      ratios.push(meanOf(result.hindcast.mse) / optimum);
    }
    const peer = await bestPeer(plants, options);
    yield row({
      suite: 'accuracy',
      case: `known plant, ${ticks} ticks, mse over the exact filter`,
      unit: 'mse ratio',
      ours: meanOf(ratios),
      peer: peer?.ratio ?? null,
      peerName: peer?.label ?? null,
      better: 'lower',
      bar,
    });
  }
}

async function bestPeer(
  plants: readonly KnownPlant[],
  options: BenchOptions,
): Promise<{ label: string; ratio: number } | null> {
  let best: { label: string; ratio: number } | null = null;
  for (const name of PEERS) {
    const ratios: number[] = [];
    for (const plant of plants) {
      const found = await peerRatio(name, plant);
      if (typeof found === 'string') options.note(`known plant: ${peerLabel(name)} left out: ${found}`);
      else ratios.push(found);
      if (typeof found === 'string') break;
    }
    if (ratios.length < plants.length) continue;
    const ratio = meanOf(ratios);
    options.note(`known plant, ${plants[0]!.input.series.ticks} ticks: ${peerLabel(name)} ${ratio.toPrecision(4)}`);
    if (best === null || ratio < best.ratio) best = { label: peerLabel(name), ratio };
  }
  return best;
}

async function peerRatio(name: string, { input, optimum }: KnownPlant): Promise<number | string> {
  const { ticks, names, values } = input.series;
  const learnTicks = Math.round(FIT_DEFAULTS.learnShare * ticks);
  const fitTicks = learnTicks + Math.round(FIT_DEFAULTS.calibrateShare * ticks);
  const data = { signals: names, inputs: [], values, horizon: HORIZON, periods: [] };
  const origins = Array.from({ length: ticks - HORIZON - fitTicks + 1 }, (_, n) => fitTicks - 1 + n);
  const folder = mkdtempSync(join(tmpdir(), 'stillwell-bench-'));
  try {
    const task = { data, learnTicks, fitTicks, origins, folder };
    layOut(task);
    const result = await runPeer(name, task);
    if ('failure' in result) return result.failure;
    const cells = errorCells(
      data,
      origins,
      result.ahead,
      names.map(() => 1),
    );
    return meanOf(cells) / optimum(fitTicks);
  } finally {
    rmSync(folder, { recursive: true, force: true });
  }
}
