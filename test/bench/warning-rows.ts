/**
 * Warnings held against what came, by name alone (`--case warnings`, some five minutes of processor): the demo's six plants, 24
 * days learned from and 60 judged, with the limits of their site files and the rule of a file that says nothing; and open data
 * sets, the last fifth judged, with limits where a twentieth of the earlier readings lies beyond. A warning came true where the
 * reading passed the limit within a horizon of its opening.
 */
import { buildPlant } from '@stillwell/demo-fleet/dist/plants/build.js';
import { DEMO_SITES, type DemoChannel, type DemoSite } from '@stillwell/demo-fleet/dist/plants/sites.js';
import { openRandom } from '@stillwell/demo-fleet/dist/random.js';
import { Sensor } from '@stillwell/demo-fleet/dist/sensors.js';
import { parseSite, type Site } from '@stillwell/protocol';
import { FIT_DEFAULTS, fit as fitHistory } from '@stillwell/trainer';
import { DATA_SETS, type DataCase, readSet } from './datasets.ts';
import { type BenchOptions, isWanted, type Row, row } from './harness.ts';
import { listen, type Outcome, outcomeOf } from './warning-outcome.ts';

const START_MS = Date.UTC(2025, 3, 7);
const LEARN_DAYS = 24;
const JUDGED_DAYS = 60;
const DAY_MS = 86_400_000;
/** Seeds that were used for nothing else. */
const FIRST_SEED = 61;
/** Share of the earlier readings beyond either limit of an open data set. */
const BEYOND = 0.05;
const OPEN_SETS = ['half-hourly load', 'sensor network', 'ice river', 'weekly CO2'];

/** A plant's or a data set's readings, laid on ticks. */
interface Case {
  readonly name: string;
  readonly site: Site;
  readonly firstTick: number;
  readonly values: readonly Float64Array[];
  /** Learned from before this index, judged from it on. */
  readonly from: number;
}

/** Rows of the case. */
export async function* warningRows(options: BenchOptions): AsyncIterable<Row> {
  if (isWanted(options, 'warnings of plants')) yield* plantRows(options);
  if (isWanted(options, 'warnings of open data')) yield* openDataRows(options);
}

async function* plantRows(options: BenchOptions): AsyncIterable<Row> {
  const demo: Outcome[] = [];
  for (const [k, site] of DEMO_SITES.entries()) {
    const outcome = await outcomeOfCase(plantCase(site, FIRST_SEED + k));
    demo.push(outcome);
    const opened = outcome.warnings.length / JUDGED_DAYS;
    const wrong = outcome.warnings.filter(({ crossed }) => crossed === null).length / JUDGED_DAYS;
    yield line(`warnings of ${site.name}, opened`, 'a day', opened, 'lower');
    yield line(`warnings of ${site.name}, opened and not come true`, 'a day', wrong, 'lower');
    options.note(`${site.name}: ${told(outcome)}`);
  }
  yield* together('warnings of plants', demo);
}

async function* openDataRows(options: BenchOptions): AsyncIterable<Row> {
  const open: Outcome[] = [];
  for (const set of DATA_SETS) {
    if (!OPEN_SETS.includes(set.name)) continue;
    const cases = readSet(set);
    if (typeof cases === 'string') {
      options.note(cases);
      continue;
    }
    for (const data of cases) {
      const outcome = await outcomeOfCase(dataCase(data));
      open.push(outcome);
      options.note(`${data.name}: ${told(outcome)}`);
    }
  }
  if (open.length > 0) yield* together('warnings of open data', open);
}

function* together(name: string, outcomes: readonly Outcome[]): Iterable<Row> {
  const warnings = outcomes.flatMap((one) => one.warnings);
  const came = warnings.filter(({ crossed }) => crossed !== null);
  const said = warnings.reduce((sum, { probability }) => sum + probability, 0) / warnings.length;
  yield row({
    suite: 'accuracy',
    case: `${name}: ${warnings.length} opened, share come true`,
    unit: 'share',
    ours: came.length / warnings.length,
    peer: said,
    peerName: 'as said',
    better: 'higher',
  });
  const sum = (pick: (one: Outcome) => number): number => outcomes.reduce((total, one) => total + pick(one), 0);
  const excursions = sum((one) => one.excursions);
  yield line(
    `${name}: ${excursions} excursions, share warned of`,
    'share',
    sum((one) => one.warned) / excursions,
    'higher',
  );
  const timed = came.filter(({ earliest, latest }) => earliest !== null && latest !== null);
  const held = timed.filter(({ crossed, earliest, latest }) => crossed! >= earliest! && crossed! <= latest!);
  const between = `${name}: of ${timed.length} that said so, crossed between earliest and latest`;
  if (timed.length > 0) yield line(between, 'share', held.length / timed.length, 'higher');
  const late = came.map(({ likely, crossed }) => Math.abs(likely! - crossed!));
  yield line(`${name}: likely time off by`, 'ticks', late.reduce((a, b) => a + b, 0) / late.length, 'lower');
}

function line(name: string, unit: string, ours: number, better: 'lower' | 'higher'): Row {
  return row({ suite: 'accuracy', case: name, unit, ours, better });
}

function told({ warnings, excursions, warned, leads, messages }: Outcome): string {
  const came = warnings.filter(({ crossed }) => crossed !== null);
  const early = came.filter(({ crossed, earliest }) => crossed! < (earliest ?? 0)).length;
  const lead = [...leads].sort((a, b) => a - b)[leads.length >> 1];
  return (
    `${warnings.length} opened, ${came.length} came true, ${early} of them before the earliest; ${warned} of ${excursions} ` +
    `excursions warned of, ${lead ?? '-'} ticks ahead in the middle; ${messages} messages`
  );
}

async function outcomeOfCase({ site, values, firstTick, from }: Case): Promise<Outcome> {
  const channels = [...site.signals, ...site.inputs];
  const { bundle } = await fitHistory(
    {
      series: {
        tickMs: site.tickMs,
        firstTick,
        ticks: from,
        names: channels.map(({ name }) => name),
        signalCount: site.signals.length,
        values: values.map((column) => column.slice(0, from)),
        digest: new Uint8Array(32),
      },
      site,
      survey: {},
      lattices: channels.map(({ resolution }) => ({ step: resolution ?? 1e-6, offset: 0 })),
    },
    FIT_DEFAULTS,
  );
  return outcomeOf(listen(bundle, site, values, firstTick, from), site, site.warn);
}

function siteText(head: readonly string[], signals: readonly string[], inputs: readonly string[]): Site {
  const text = [
    ...head,
    'time_zone: UTC',
    'signals:',
    ...signals,
    ...(inputs.length === 0 ? [] : ['inputs:', ...inputs]),
  ];
  return parseSite(`${text.join('\n')}\n`, 'bench site');
}

function plantCase(demo: DemoSite, seed: number): Case {
  const { tickMs } = demo.design;
  const ticks = ((LEARN_DAYS + JUDGED_DAYS) * DAY_MS) / tickMs;
  const plant = buildPlant(demo, seed, START_MS);
  const sensors = demo.channels.map((channel) => new Sensor(channel, openRandom(seed, `sensor ${channel.name}`)));
  const values = sensors.map(() => new Float64Array(ticks));
  for (let t = 0; t < ticks; t++) {
    plant.step(START_MS + t * tickMs);
    for (const [c, sensor] of sensors.entries()) values[c]![t] = sensor.read(plant.values[c]!);
  }
  const entry = ({
    name,
    unit,
    resolution,
    range,
    aggregate,
    limits: { high, highHigh, low },
  }: DemoChannel): string => {
    const limits = Object.entries({ high, high_high: highHigh, low }).flatMap(([key, value]) =>
      value === undefined ? [] : [`${key}: ${value}`],
    );
    return `  - {name: ${name}, unit: '${unit}', resolution: ${resolution}, range: [${range.join(', ')}], aggregate: ${aggregate}, limits: {${limits.join(', ')}}}`;
  };
  const of = (role: string): string[] => demo.channels.filter((one) => one.role === role).map(entry);
  const head = [`site: ${demo.name}`, `tick: ${tickMs / 1000}s`, `horizon: ${demo.horizon}`];
  const from = (LEARN_DAYS * DAY_MS) / tickMs;
  return {
    name: demo.name,
    site: siteText(head, of('signal'), of('input')),
    firstTick: START_MS / tickMs,
    values,
    from,
  };
}

function dataCase(data: DataCase): Case {
  const from = Math.round((FIT_DEFAULTS.learnShare + FIT_DEFAULTS.calibrateShare) * data.values[0]!.length);
  const entry = (name: string, c: number): string => {
    const seen = Array.from(data.values[c]!.subarray(0, from))
      .filter(Number.isFinite)
      .sort((a, b) => a - b);
    const at = (share: number): number => seen[Math.round(share * (seen.length - 1))]!;
    return `  - {name: ${name}, unit: '1', limits: {low: ${at(BEYOND)}, high: ${at(1 - BEYOND)}}}`;
  };
  const head = ['site: open-data', `tick: ${data.tickMs}ms`, `horizon: ${data.horizon}`];
  const inputs = data.inputs.map((name) => `  - {name: ${name}, unit: '1'}`);
  const site = siteText(head, data.signals.map(entry), inputs);
  return { name: data.name, site, firstTick: Math.round(data.firstMs / data.tickMs), values: data.values, from };
}
