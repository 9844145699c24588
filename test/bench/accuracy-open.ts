/**
 * Our error over the best peer's on open data sets. The split is that of a fit with its defaults: ours learns on the first 60 %
 * and calibrates on the next 20 %; peers fit on both. Both forecast from the same origins in the last 20 %, evenly spaced, all
 * steps of the horizon; squared errors in units of the learning part's standard deviation, averaged over signals and steps;
 * readings that are missing are no targets. The best peer is the one with the least error there, chosen after the fact: harder
 * to beat than any single one.
 */
import { mkdtempSync, rmSync, writeFileSync } from 'node:fs';
import { availableParallelism, tmpdir } from 'node:os';
import { join } from 'node:path';
import { parseSite, type Site } from '@stillwell/protocol';
import { createState, forecastPath, update } from '@stillwell/runtime/filter';
import { FIT_DEFAULTS, fit as fitHistory, loadHistory } from '@stillwell/trainer';
import { errorCells, geometricMean, learnScales, meanOf } from './accuracy-errors.ts';
import { DATA_SETS, type DataCase, readSet } from './datasets.ts';
import type { BenchOptions, Row } from './harness.ts';
import { isWanted, row } from './harness.ts';
import { layOut, type PeerForecast, type PeerTask, peerLabel, runPeer } from './peers.ts';

const PEERS_AT_ONCE = Math.min(2, availableParallelism());

/** A task that keeps all of its case. */
interface OpenTask extends PeerTask {
  readonly data: DataCase;
}

/** Ours: (origins × signals × horizon), and what made it. */
interface Forecast {
  readonly ahead: Float64Array;
  readonly made: string;
}

/** A peer's mean squared error, and by signal and step. */
interface PeerError {
  readonly name: string;
  readonly mse: number;
  readonly cells: Float64Array;
}

/** A row a case, and the geometric mean over sets. */
export async function* openRows(options: BenchOptions): AsyncIterable<Row> {
  const bySet = new Map<string, number[]>();
  for (const set of DATA_SETS) {
    if (!isWanted(options, set.name)) continue;
    const cases = readSet(set);
    if (typeof cases === 'string') {
      options.note(cases);
      continue;
    }
    for (const data of cases) {
      const line = await caseRow(data, options);
      if (line === null) continue;
      yield line;
      if (line.ratio !== null) bySet.set(data.set, [...(bySet.get(data.set) ?? []), line.ratio]);
    }
  }
  if (bySet.size === 0) return;
  yield row({
    suite: 'accuracy',
    case: `open data, geometric mean of ${bySet.size} of ${DATA_SETS.length} sets over the best peer`,
    unit: 'mse ratio',
    ours: geometricMean([...bySet.values()].map(geometricMean)),
    better: 'lower',
    bar: 1,
  });
}

async function caseRow(data: DataCase, options: BenchOptions): Promise<Row | null> {
  const folder = mkdtempSync(join(tmpdir(), 'stillwell-bench-'));
  try {
    const task = taskOf(data, folder);
    const errors = await peerErrors(task, options);
    let ours: Forecast;
    try {
      ours = await ourForecast(task);
    } catch (error) {
      options.note(`${data.name}: no model of ours, left out of the mean: ${(error as Error).message}`);
      return null;
    }
    const best = errors.reduce<PeerError | null>(
      (least, one) => (least === null || one.mse < least.mse ? one : least),
      null,
    );
    const cells = errorCells(data, task.origins, ours.ahead, learnScales(data, task.learnTicks));
    const mse = meanOf(cells);
    options.note(`${data.name}: ours ${mse.toPrecision(4)}, ${ours.made}`);
    if (best !== null) noteSteps(data, cells, best, options);
    return row({
      suite: 'accuracy',
      case: `${data.name}, ${task.origins.length} origins, mse of steps 1..${data.horizon}`,
      unit: 'sd²',
      ours: mse,
      peer: best?.mse ?? null,
      peerName: best === null ? null : peerLabel(best.name),
      better: 'lower',
      bar: 1,
      barOnRatio: true,
    });
  } finally {
    rmSync(folder, { recursive: true, force: true });
  }
}

function taskOf(data: DataCase, folder: string): OpenTask {
  const ticks = data.values[0]!.length;
  const learnTicks = Math.round(FIT_DEFAULTS.learnShare * ticks);
  const fitTicks = learnTicks + Math.round(FIT_DEFAULTS.calibrateShare * ticks);
  const first = fitTicks - 1;
  const room = ticks - data.horizon - first;
  const every = Math.max(1, Math.floor(room / data.origins));
  const origins = Array.from({ length: Math.floor((room - 1) / every) + 1 }, (_, n) => first + n * every);
  const task = { data, learnTicks, fitTicks, origins, folder };
  layOut(task);
  return task;
}

async function peerErrors(task: OpenTask, options: BenchOptions): Promise<PeerError[]> {
  const scales = learnScales(task.data, task.learnTicks);
  const waiting = [...task.data.peers];
  const found: PeerError[] = [];
  const work = async (): Promise<void> => {
    for (let name = waiting.shift(); name !== undefined; name = waiting.shift()) {
      const begun = performance.now();
      const result: PeerForecast = await runPeer(name, task);
      const seconds = ((performance.now() - begun) / 1000).toFixed(0);
      if ('failure' in result) options.note(`${task.data.name}: ${peerLabel(name)} left out: ${result.failure}`);
      else {
        const cells = errorCells(task.data, task.origins, result.ahead, scales);
        const mse = meanOf(cells);
        found.push({ name, mse, cells });
        options.note(`${task.data.name}: ${peerLabel(name)} ${mse.toPrecision(4)}, ${seconds} s`);
      }
    }
  };
  await Promise.all(Array.from({ length: PEERS_AT_ONCE }, work));
  return found;
}

/** Where along the horizon the error comes from. */
function noteSteps(data: DataCase, ours: Float64Array, best: PeerError, options: BenchOptions): void {
  const { horizon } = data;
  const steps = [...new Set([1, Math.ceil(horizon / 4), Math.ceil(horizon / 2), horizon])];
  const at = (cells: Float64Array, i: number, h: number): string => cells[i * horizon + h - 1]!.toPrecision(3);
  data.signals.forEach((signal, i) => {
    const parts = steps.map((h) => `step ${h}: ${at(ours, i, h)} against ${at(best.cells, i, h)}`);
    options.note(`${data.name}, ${signal}: ${parts.join(', ')} (${peerLabel(best.name)})`);
  });
}

/** Through the public door, as a person would: a file, a site, the defaults; then the gateway's filter over the whole record. */
async function ourForecast({ data, origins, folder }: OpenTask): Promise<Forecast> {
  const file = join(folder, 'history.csv');
  const names = [...data.signals, ...data.inputs];
  const lines = Array.from({ length: data.values[0]!.length }, (_, t) => {
    const cells = data.values.map((y) => (Number.isNaN(y[t]!) ? '' : String(y[t])));
    return [new Date(data.firstMs + t * data.tickMs).toISOString(), ...cells].join(',');
  });
  writeFileSync(file, `time,${names.join(',')}\n${lines.join('\n')}\n`);
  const site = siteOf(data);
  const { series, survey, lattices } = await loadHistory([file], site, { zone: 'UTC' });
  const { model, document, chosen } = await fitHistory({ series, site, survey, lattices }, FIT_DEFAULTS);
  if (document.length > FIT_DEFAULTS.maxBytes) throw new Error(`bundle of ${document.length} bytes`);
  const state = createState(model);
  const width = data.signals.length * data.horizon;
  const ahead = new Float64Array(origins.length * width);
  const path = new Float64Array(width);
  const readings = new Float64Array(names.length);
  const at = new Map(origins.map((origin, n) => [origin, n]));
  for (let t = 0; t <= origins.at(-1)!; t++) {
    for (let c = 0; c < readings.length; c++) readings[c] = series.values[c]![t]!;
    update(model, state, series.firstTick + t, readings);
    const n = at.get(t);
    if (n === undefined) continue;
    forecastPath(model, state, path);
    ahead.set(path, n * width);
  }
  return { ahead, made: `${chosen.kind}: ${chosen.name}` };
}

function siteOf(data: DataCase): Site {
  const channel = (name: string): readonly string[] => [`  - name: ${name}`, "    unit: '1'"];
  const text = [
    'site: open-data',
    'time_zone: UTC',
    `tick: ${data.tickMs}ms`,
    `horizon: ${data.horizon}`,
    'signals:',
    ...data.signals.flatMap(channel),
    ...(data.inputs.length > 0 ? ['inputs:', ...data.inputs.flatMap(channel)] : []),
  ];
  return parseSite(`${text.join('\n')}\n`, 'bench site');
}
