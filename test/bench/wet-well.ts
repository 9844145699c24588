/**
 * Wet wells of the demo, a hundred days of minutes each: 60 learned from, 15 to choose and calibrate by, 25 judged; pump
 * commands unknown ahead. The level's error at half an hour and an hour beside gradient boosting on the same readings. The
 * seeds here were used for nothing else.
 */
import { spawnSync } from 'node:child_process';
import { mkdtempSync, rmSync, writeFileSync } from 'node:fs';
import { tmpdir } from 'node:os';
import { join } from 'node:path';
import { fileURLToPath } from 'node:url';
import { buildPlant } from '@stillwell/demo-fleet/dist/plants/build.js';
import { DEMO_SITES, type DemoSite } from '@stillwell/demo-fleet/dist/plants/sites.js';
import { openRandom } from '@stillwell/demo-fleet/dist/random.js';
import { Sensor } from '@stillwell/demo-fleet/dist/sensors.js';
import { parseSite } from '@stillwell/protocol';
import { FIT_DEFAULTS, type FitResult, fit as fitHistory } from '@stillwell/trainer';
import type { BenchOptions, Row } from './harness.ts';
import { row } from './harness.ts';

const WELLS = [
  ['brackwith', 21],
  ['quennadale', 33],
  ['ellerquint', 47],
] as const;
const START_MS = Date.UTC(2025, 3, 7);
const DAYS = 100;
const LEARN_SHARE = 0.6;
const CALIBRATE_SHARE = 0.15;
/** Minutes ahead, and the most of boosting's error that is to be left, on geometric mean over the wells. */
const STEPS = [
  [30, 0.75],
  [60, 0.9],
] as const;
const SEAL_BYTES = 128;
const SCRIPT = fileURLToPath(new URL('../peers/wet_well.py', import.meta.url));
const PYTHON = '/usr/bin/python3';

/** Rows of the case. */
export async function* wetWellRows(options: BenchOptions): AsyncIterable<Row> {
  const ratios: number[][] = STEPS.map(() => []);
  for (const [name, seed] of WELLS) {
    const site = DEMO_SITES.find((one) => one.name === name)!;
    const values = readings(site, seed);
    const startMs = process.cpuUsage();
    const result = await fitHistory(input(site, values), {
      ...FIT_DEFAULTS,
      learnShare: LEARN_SHARE,
      calibrateShare: CALIBRATE_SHARE,
    });
    const { user, system } = process.cpuUsage(startMs);
    const peer = boosting(values, result, options);
    for (const [k, [step]] of STEPS.entries()) {
      const ours = Math.sqrt(result.hindcast.mse[step - 1]!);
      const theirs = peer?.get(step) ?? null;
      if (theirs !== null) ratios[k]!.push(ours / theirs);
      yield row({
        suite: 'accuracy',
        case: `wet well ${name}, level ${step} min ahead, ${result.bundle.kind}`,
        unit: 'm rms',
        ours,
        peer: theirs,
        peerName: theirs === null ? null : 'scikit-learn boosting',
        better: 'lower',
      });
    }
    yield row({
      suite: 'accuracy',
      case: `wet well ${name}, sealed bundle`,
      unit: 'bytes',
      ours: result.document.length + SEAL_BYTES,
      better: 'lower',
      bar: 24 * 1024,
    });
    yield row({
      suite: 'accuracy',
      case: `wet well ${name}, every kind fitted and the best judged`,
      unit: 's of processor',
      ours: (user + system) / 1e6,
      better: 'lower',
    });
  }
  for (const [k, [step, bar]] of STEPS.entries()) {
    if (ratios[k]!.length === 0) continue;
    yield row({
      suite: 'accuracy',
      case: `wet wells, level ${step} min ahead, error over boosting's`,
      unit: 'ratio',
      ours: Math.exp(ratios[k]!.reduce((sum, ratio) => sum + Math.log(ratio), 0) / ratios[k]!.length),
      better: 'lower',
      bar,
    });
  }
}

/** The plant's readings through its sensors, a column after the other. */
function readings(site: DemoSite, seed: number): Float64Array[] {
  const ticks = (DAYS * 86_400_000) / site.design.tickMs;
  const plant = buildPlant(site, seed, START_MS);
  const sensors = site.channels.map((channel) => new Sensor(channel, openRandom(seed, `sensor ${channel.name}`)));
  const values = sensors.map(() => new Float64Array(ticks));
  for (let t = 0; t < ticks; t++) {
    plant.step(START_MS + t * site.design.tickMs);
    for (const [c, sensor] of sensors.entries()) values[c]![t] = sensor.read(plant.values[c]!);
  }
  return values;
}

function input(demo: DemoSite, values: readonly Float64Array[]) {
  const lines = (role: string): string[] =>
    demo.channels
      .filter((channel) => channel.role === role)
      .flatMap(({ name, unit, resolution, range, aggregate }) => [
        `  - name: ${name}`,
        `    unit: '${unit}'`,
        `    resolution: ${resolution}`,
        `    range: [${range.join(', ')}]`,
        `    aggregate: ${aggregate}`,
      ]);
  const inputs = lines('input');
  const text = [
    `site: ${demo.name}`,
    'class: wet-well',
    'time_zone: UTC',
    `tick: ${demo.design.tickMs / 1000}s`,
    `horizon: ${demo.horizon}`,
    'signals:',
    ...lines('signal'),
    ...(inputs.length === 0 ? [] : ['inputs:', ...inputs]),
  ];
  return {
    series: {
      tickMs: demo.design.tickMs,
      firstTick: START_MS / demo.design.tickMs,
      ticks: values[0]!.length,
      names: demo.channels.map((channel) => channel.name),
      signalCount: demo.channels.filter((channel) => channel.role === 'signal').length,
      values,
      digest: new Uint8Array(32),
    },
    site: parseSite(`${text.join('\n')}\n`, 'bench site'),
    survey: {},
    lattices: demo.channels.map((channel) => ({ step: channel.resolution, offset: 0 })),
  };
}

/** Boosting's error by step, or null with a line that says why. */
function boosting(
  values: readonly Float64Array[],
  { learn, judged }: FitResult,
  options: BenchOptions,
): Map<number, number> | null {
  const folder = mkdtempSync(join(tmpdir(), 'stillwell-wells-'));
  try {
    const path = join(folder, 'values.bin');
    writeFileSync(path, Buffer.concat(values.map((column) => Buffer.from(column.buffer))));
    const numbers = [
      values[0]!.length,
      values.length,
      learn.toTick - learn.fromTick,
      judged.fromTick - learn.fromTick,
      ...STEPS.map(([step]) => step),
    ];
    const run = spawnSync(PYTHON, ['-B', SCRIPT, path, ...numbers.map(String)], { encoding: 'utf8' });
    if (run.status !== 0) {
      const isMissing = run.error !== undefined || /No module named/.test(run.stderr);
      options.note(
        isMissing
          ? 'wet well: boosting is left out; install the Debian package python3-sklearn'
          : `wet well: boosting failed: ${run.stderr.trim().split('\n').at(-1)}`,
      );
      return null;
    }
    return new Map(
      run.stdout
        .trim()
        .split('\n')
        .map((line) => line.split(' ').map(Number))
        .map(([step, error]) => [step!, error!]),
    );
  } finally {
    rmSync(folder, { recursive: true, force: true });
  }
}
