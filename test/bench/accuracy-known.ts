/** What is learned beside a known optimum: its error over the exact filter's falls to 1 as the history grows. */
import { mkdtempSync, rmSync } from 'node:fs';
import { tmpdir } from 'node:os';
import { join } from 'node:path';
import { FIT_DEFAULTS, fit as fitHistory } from '@stillwell/trainer';
import { errorCells, meanOf } from './accuracy-errors.ts';
import type { BenchOptions, Row } from './harness.ts';
import { isWanted, row } from './harness.ts';
import { coupledPlant } from './known-coupled.ts';
import { HORIZON, type KnownPlant, knownPlant } from './known-plant.ts';
import { layOut, peerLabel, runPeer } from './peers.ts';

/** Ticks, bar, histories; short ones differ more. An input makes a fit try more kinds, which takes longer. */
const PLANTS = [
  { name: 'known plant', make: knownPlant, ticks: 4000, bar: 1.03, count: 8 },
  { name: 'known plant', make: knownPlant, ticks: 16_000, bar: 1.01, count: 4 },
  { name: 'known plant, coupled, with an input', make: coupledPlant, ticks: 4000, bar: 1.03, count: 2 },
];
const FIRST_SEED = 5;
const PEERS = ['autoregression', 'n4sid'] as const;

/** A row a plant and size: mean over seeds, beside the better peer's. */
export async function* knownRows(options: BenchOptions): AsyncIterable<Row> {
  for (const { name, make, ticks, bar, count } of PLANTS) {
    if (!isWanted(options, name)) continue;
    const plants = Array.from({ length: count }, (_, n) => make(ticks, FIRST_SEED + n));
    const ratios: number[] = [];
    for (const plant of plants) {
      const result = await fitHistory(plant.input, FIT_DEFAULTS);
      const optimum = plant.optimum(result.judged.fromTick - plant.input.series.firstTick);
      ratios.push(meanOf(result.hindcast.mse) / optimum);
    }
    const peer = await bestPeer(`${name}, ${ticks} ticks`, plants, options);
    yield row({
      suite: 'accuracy',
      case: `${name}, ${ticks} ticks, mse over the exact filter`,
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
  name: string,
  plants: readonly KnownPlant[],
  options: BenchOptions,
): Promise<{ label: string; ratio: number } | null> {
  let best: { label: string; ratio: number } | null = null;
  for (const peer of PEERS) {
    const label = peerLabel(peer);
    const ratio = await meanRatio(peer, plants);
    if (typeof ratio === 'string') options.note(`${name}: ${label} left out: ${ratio}`);
    else {
      options.note(`${name}: ${label} ${ratio.toPrecision(4)}`);
      if (best === null || ratio < best.ratio) best = { label, ratio };
    }
  }
  return best;
}

/** Mean over all plants, or why one of them has no forecast. */
async function meanRatio(peer: string, plants: readonly KnownPlant[]): Promise<number | string> {
  const ratios: number[] = [];
  for (const plant of plants) {
    const found = await peerRatio(peer, plant);
    if (typeof found === 'string') return found;
    ratios.push(found);
  }
  return meanOf(ratios);
}

async function peerRatio(peer: string, { input, optimum }: KnownPlant): Promise<number | string> {
  const { ticks, names, values, signalCount } = input.series;
  const learnTicks = Math.round(FIT_DEFAULTS.learnShare * ticks);
  const fitTicks = learnTicks + Math.round(FIT_DEFAULTS.calibrateShare * ticks);
  const [signals, inputs] = [names.slice(0, signalCount), names.slice(signalCount)];
  const data = { signals, inputs, values, horizon: HORIZON, periods: [] };
  const origins = Array.from({ length: ticks - HORIZON - fitTicks + 1 }, (_, n) => fitTicks - 1 + n);
  const folder = mkdtempSync(join(tmpdir(), 'stillwell-bench-'));
  try {
    const task = { data, learnTicks, fitTicks, origins, folder };
    layOut(task);
    const result = await runPeer(peer, task);
    if ('failure' in result) return result.failure;
    const raw = signals.map(() => 1);
    return meanOf(errorCells(data, origins, result.ahead, raw)) / optimum(fitTicks);
  } finally {
    rmSync(folder, { recursive: true, force: true });
  }
}
