/**
 * What the gateway tells of its signals: words a month on sound readings that no fit has seen, and ticks until planted faults
 * are told of. Demo plants of sixty days, thirty of them watched, half-hourly load of a country, and with --data the
 * transformer's oil (ETTh1.csv). A fault is planted in one signal after another; what is counted is any word on that signal.
 */
import { readFileSync } from 'node:fs';
import { join } from 'node:path';
import { buildPlant } from '@stillwell/demo-fleet/dist/plants/build.js';
import { DEMO_SITES } from '@stillwell/demo-fleet/dist/plants/sites.js';
import { openRandom } from '@stillwell/demo-fleet/dist/random.js';
import { Sensor } from '@stillwell/demo-fleet/dist/sensors.js';
import { parseSite } from '@stillwell/protocol';
import { Serving, SignalWatch } from '@stillwell/runtime';
import { disagreesWith, standsStill } from '@stillwell/runtime/filter';
import { FIT_DEFAULTS, type FitResult, fit as fitHistory } from '@stillwell/trainer';
import { DATA_SETS, readSet } from './datasets.ts';
import { type BenchOptions, isWanted, type Row, row } from './harness.ts';
import { gaussians, PLANTED, type Planted } from './planted-faults.ts';

const START_MS = Date.UTC(2025, 3, 7);
const DAYS = 60;
const MONTH_MS = 30 * 86_400_000;
const LEARN_SHARE = 0.4;
const CALIBRATE_SHARE = 0.1;
const PLANTS = [
  ['brackwith', 121],
  ['quennadale', 133],
  ['penvarrow', 151],
  ['tessenby', 163],
] as const;
const WORDS = ['implausible', 'noisy', 'jumping', 'drifting', 'disagreeing', 'stuck'] as const;
/** Ticks that the filter may settle in before anything counts. */
const SETTLE_TICKS = 500;

type FitInput = Parameters<typeof fitHistory>[0];

interface Case {
  readonly name: string;
  readonly input: FitInput;
}

/** Rows of the suite. */
export async function* rows(options: BenchOptions): AsyncIterable<Row> {
  for (const { name, input } of cases(options)) {
    const result = await fitHistory(input, {
      ...FIT_DEFAULTS,
      learnShare: LEARN_SHARE,
      calibrateShare: CALIBRATE_SHARE,
      override: 'bench',
    });
    const from = result.judged.fromTick - input.series.firstTick;
    yield* soundRows(name, input, result, from);
    for (const planted of PLANTED) yield* plantedRows(name, input, result, from, planted);
  }
}

/** Words that rise on sound readings, a month and signal. */
function* soundRows(name: string, input: FitInput, result: FitResult, from: number): Iterable<Row> {
  const { series } = input;
  const risen = new Map<string, number>(WORDS.map((word) => [word, 0]));
  const was = new Set<string>();
  watch(result, series.values, series.firstTick, from - SETTLE_TICKS, (t, signal, word, isSaid) => {
    const key = `${signal} ${word}`;
    if (isSaid && !was.has(key) && t >= from) risen.set(word, risen.get(word)! + 1);
    if (isSaid) was.add(key);
    else was.delete(key);
    return true;
  });
  const months = ((series.ticks - from) * series.tickMs) / MONTH_MS;
  for (const [word, count] of risen) {
    yield row({
      suite: 'faults',
      case: `${name}, ${result.bundle.kind}, sound readings, "${word}"`,
      unit: 'a month and signal',
      ours: count / months / series.signalCount,
      better: 'lower',
      bar: 1,
    });
  }
}

/** Of the signals, how many were told of within a day of ticks, and after how many ticks on average. */
function* plantedRows(
  name: string,
  { series }: FitInput,
  result: FitResult,
  from: number,
  { name: fault, plant }: Planted,
): Iterable<Row> {
  const dayTicks = 86_400_000 / series.tickMs;
  const at = from + SETTLE_TICKS;
  const until = Math.min(series.ticks, at + Math.ceil(2 * dayTicks));
  const delays: number[] = [];
  for (let faulty = 0; faulty < series.signalCount; faulty++) {
    const values = series.values.map((y) => y.slice(0, until));
    const { scale } = result.model;
    plant(values[faulty]!, at, { scale: scale[faulty]!, dayTicks, normal: gaussians(faulty + 1) });
    let delay = Number.POSITIVE_INFINITY;
    const before = new Set<string>();
    watch(result, values, series.firstTick, from - SETTLE_TICKS, (t, signal, word, isSaid) => {
      if (signal !== faulty || !isSaid) return true;
      if (t < at) before.add(word);
      else if (!before.has(word) && delay > t - at) delay = t - at;
      return delay === Number.POSITIVE_INFINITY;
    });
    delays.push(delay);
  }
  const told = delays.filter(Number.isFinite);
  const label = `${name}, ${fault}`;
  yield row({
    suite: 'faults',
    case: `${label}, told within two days`,
    unit: 'share of signals',
    ours: told.length / delays.length,
    better: 'higher',
  });
  if (told.length === 0) return;
  const mean = told.reduce((sum, one) => sum + one, 0) / told.length;
  yield row({ suite: 'faults', case: `${label}, told after`, unit: 'ticks', ours: mean, better: 'lower' });
}

/** Runs the filter from a little before and says every word at every tick; stops where `visit` says so. */
function watch(
  { bundle, model }: FitResult,
  values: readonly Float64Array[],
  firstTick: number,
  from: number,
  visit: (t: number, signal: number, word: (typeof WORDS)[number], isSaid: boolean) => boolean,
): void {
  const serving = new Serving({ bundle, model, digest: new Uint8Array(32), epoch: 1, sequence: 1 });
  const watched = new SignalWatch(model.channelCount);
  const readings = new Float64Array(model.channelCount);
  for (let t = Math.max(0, from); t < values[0]!.length; t++) {
    for (let c = 0; c < readings.length; c++) readings[c] = values[c]![t]!;
    serving.fold(firstTick + t, readings);
    watched.observe(serving);
    for (let i = 0; i < model.signalCount; i++) {
      const said = {
        implausible: watched.isImplausible(i),
        noisy: watched.isNoisy(i),
        jumping: watched.isJumping(i),
        drifting: watched.isDrifting(i),
        disagreeing: disagreesWith(model, serving.state, i) >= 0,
        stuck: standsStill(model, serving.state, i),
      };
      for (const word of WORDS) if (!visit(t, i, word, said[word])) return;
    }
  }
}

function* cases(options: BenchOptions): Iterable<Case> {
  for (const [name, seed] of PLANTS) if (isWanted(options, name)) yield { name, input: plantInput(name, seed) };
  const load = DATA_SETS.find((set) => set.name === 'half-hourly load')!;
  if (isWanted(options, load.name)) {
    const read = readSet(load);
    if (typeof read === 'string') options.note(read);
    else {
      const { name, tickMs, signals, values, firstMs, horizon } = read[0]!;
      yield { name, input: plainInput(tickMs, signals, values, firstMs, horizon) };
    }
  }
  if (options.data !== null && isWanted(options, 'ETTh1')) {
    const [head, ...lines] = readFileSync(join(options.data, 'ETTh1.csv'), 'utf8').trim().split(/\r?\n/);
    const cells = lines.map((line) => line.split(',').slice(1).map(Number));
    const names = head!.split(',').slice(1);
    const values = names.map((_, c) => Float64Array.from(cells, (line) => line[c]!));
    yield { name: 'ETTh1', input: plainInput(3_600_000, names, values, Date.UTC(2016, 6, 1), 24) };
  }
}

/** The plant's readings through its sensors. */
function plantInput(name: string, seed: number): FitInput {
  const site = DEMO_SITES.find((one) => one.name === name)!;
  const { tickMs } = site.design;
  const ticks = (DAYS * 86_400_000) / tickMs;
  const plant = buildPlant(site, seed, START_MS);
  const sensors = site.channels.map((channel) => new Sensor(channel, openRandom(seed, `sensor ${channel.name}`)));
  const values = sensors.map(() => new Float64Array(ticks));
  for (let t = 0; t < ticks; t++) {
    plant.step(START_MS + t * tickMs);
    for (const [c, sensor] of sensors.entries()) values[c]![t] = sensor.read(plant.values[c]!);
  }
  const signals = site.channels.filter(({ role }) => role === 'signal').map((channel) => channel.name);
  const inputs = site.channels.filter(({ role }) => role === 'input').map((channel) => channel.name);
  const steps = site.channels.map((channel) => channel.resolution);
  return plainInput(tickMs, signals, values, START_MS, site.horizon, inputs, steps);
}

function plainInput(
  tickMs: number,
  signals: readonly string[],
  values: readonly Float64Array[],
  firstMs: number,
  horizon: number,
  inputs: readonly string[] = [],
  steps: readonly number[] = values.map(() => 0.001),
): FitInput {
  const list = (role: string, names: readonly string[]): string[] =>
    names.length === 0 ? [] : [`${role}:`, ...names.flatMap((name) => [`  - name: ${name}`, "    unit: '1'"])];
  const text = ['site: bench', 'time_zone: UTC', `tick: ${tickMs / 1000}s`, `horizon: ${horizon}`];
  return {
    series: {
      tickMs,
      firstTick: firstMs / tickMs,
      ticks: values[0]!.length,
      names: [...signals, ...inputs],
      signalCount: signals.length,
      values,
      digest: new Uint8Array(32),
    },
    site: parseSite(`${[...text, ...list('signals', signals), ...list('inputs', inputs)].join('\n')}\n`, 'bench site'),
    survey: {},
    lattices: steps.map((step) => ({ step, offset: 0 })),
  };
}
