/** From an archive to a candidate: what is joined, what wins, and that a plant which has changed is learned anew. */
import { bundleDigest, parseSite } from '@stillwell/protocol';
import { describe, expect, onTestFinished, test, vi } from 'vitest';
import { openDocument } from '../../../trainer/bundle-file.ts';
import type { Archive } from '../../../trainer/desk/archive.ts';
import { decodeFactors } from '../../../trainer/factors/file.ts';
import { FactorsKeeper } from '../../../trainer/factors/keeper.ts';
import type { History } from '../../../trainer/history/history.ts';
import { prepare } from '../../../trainer/history/load.ts';
import { FIT_DEFAULTS, fit as learn } from '../../../trainer/pipeline.ts';
import { absorb } from '../../../trainer/refit/absorb.ts';
import { refit } from '../../../trainer/refit/refit.ts';
import { SecondThread } from '../../../trainer/threads/second-thread.ts';
import { seededNumbers } from '../../support/models.ts';

const HOUR = 3_600_000;
const START = 490_000;
const site = parseSite(
  `site: heat-2
class: test
time_zone: UTC
tick: 1h
horizon: 12
signals:
  - { name: supply, unit: Cel, resolution: 0.1, aggregate: mean }
  - { name: load, unit: kW, resolution: 0.1, aggregate: mean }
`,
  'site.yaml',
);
const lattice = { step: 0.1, offset: 0 };

/** Two signals that follow the day and each other; from `change` on, the load swings three times a day. */
function plant(ticks: number, change: number): Float64Array[] {
  const random = seededNumbers(31);
  const [supply, load] = [new Float64Array(ticks), new Float64Array(ticks)];
  let wander = 0;
  for (let n = 0; n < ticks; n++) {
    wander = 0.9 * wander + (random() + random() - 1);
    const day = Math.sin((2 * Math.PI * n) / 24);
    const swing = n < change ? day : Math.sin((6 * Math.PI * n) / 24);
    supply[n] = Math.round((60 + 5 * day + wander) * 10) / 10;
    load[n] = Math.round((200 + 20 * swing + 3 * wander + random()) * 10) / 10;
  }
  return [supply, load];
}

const NAMES = ['supply', 'load'] as const;

function historyOf(values: readonly Float64Array[], from: number, to: number): History {
  const times = Float64Array.from({ length: to - from }, (_, i) => (START + from + i) * HOUR);
  const channels = NAMES.map((name, c) => ({ name, times, values: values[c]!.slice(from, to) }));
  const file = {
    file: 'log.csv',
    format: 'wide CSV' as const,
    separator: ',',
    rows: times.length,
    bytes: 0,
    sha256: '00',
    timeKind: 'ISO with zone' as const,
    columnsIgnored: [],
    missingMarks: {},
    passedOver: {},
  };
  return { channels, signalCount: 2, files: [file], zone: null, clockChanges: [] };
}

function archiveOf(values: readonly Float64Array[], from: number, to: number): Archive {
  const ticks = Float64Array.from({ length: to - from }, (_, i) => START + from + i);
  const channels = NAMES.map((name, c) => {
    const column = values[c]!.slice(from, to);
    return { name, role: 'signal' as const, unit: site.signals[c]!.unit, values: column, original: column, lattice };
  });
  return { site: 'heat-2', tickMs: HOUR, ticks, channels, segments: 1, corrections: 0, bundles: [] };
}

describe('joining', () => {
  const values = plant(600, 600);

  test('the archive wins where both cover a tick, and files fill what it lacks', () => {
    const files = historyOf(values, 0, 400);
    const other = values.map((column) => column.map((value) => value + 1));
    other[0]![395] = Number.NaN;
    const { series, newFromTick } = absorb(archiveOf(other, 390, 600), files, site);
    expect([series.firstTick, series.ticks, newFromTick]).toEqual([START, 600, START + 400]);
    expect(series.values[0]![389]).toBe(values[0]![389]);
    expect(series.values[0]![392]).toBeCloseTo(values[0]![392]! + 1, 9);
    expect(series.values[0]![395]).toBe(values[0]![395]);
    expect(series.values[1]![599]).toBeCloseTo(values[1]![599]! + 1, 9);
  });

  test('another tick, and a signal the archive does not know, are refused by name', () => {
    const archive = archiveOf(values, 0, 600);
    expect(() => absorb({ ...archive, tickMs: 60_000 }, null, site)).toThrow(
      /ticks are 60 s, the site file says 3600 s/,
    );
    expect(() => absorb({ ...archive, channels: archive.channels.slice(1) }, null, site)).toThrow(
      /found none for "supply"/,
    );
  });

  test('a stray tick of a gateway whose clock was wrong is named, not laid out over fifty years', () => {
    const archive = archiveOf(values, 0, 600);
    const minutes = { ...site, tickMs: 60_000 };
    const stray = {
      ...archive,
      tickMs: 60_000,
      ticks: Float64Array.from(archive.ticks, (tick, i) => (i === 0 ? 5 : tick * 60)),
    };
    expect(() => absorb(stray, null, minutes)).toThrow(/wrong clock: give --from/);
  });
});

test('a plant that changed is learned anew, held against the old bundle, and recommended', {
  timeout: 60_000,
}, async () => {
  const values = plant(3000, 1500);
  const files = historyOf(values, 0, 1500);
  const first = prepare(files, site);
  const old = await learn({ series: first.series, site, survey: first.survey, lattices: first.lattices }, FIT_DEFAULTS);
  const previous = openDocument(old.document);
  const { learnShare: _, calibrateShare: __, ...rest } = FIT_DEFAULTS;
  const archive = archiveOf(values, 1500, 3000);
  const options = { ...rest, useAll: true, learnShare: null, calibrateShare: null };
  const { fit: result, comparison } = await refit(
    { archive, files: null, factors: null, halfLifeTicks: null, site, previous },
    options,
  );
  expect(result.bundle.provenance.previous).toEqual(bundleDigest(old.document));
  expect(comparison!.seenByPrevious).toBe(0);
  expect(comparison!.ratio).toBeLessThan(0.8);
  expect(comparison).toMatchObject({ isRecommended: true, sentence: expect.stringContaining('Recommended: seal it') });
  // The same data against itself gains nothing, and says so.
  const again = await refit(
    { archive, files: null, factors: null, halfLifeTicks: null, site, previous: openDocument(result.document) },
    { ...options, useAll: false },
  );
  expect(again.comparison!.isRecommended).toBe(false);
  expect(again.comparison!.seenByPrevious).toBe(1);
  expect(again.comparison!.sentence).toContain('had seen 100 % of that time');
});

test('factors stand in for the files they were made from, and go on with what is new', {
  timeout: 60_000,
}, async () => {
  const values = plant(4000, 4000);
  const files = historyOf(values, 0, 2500);
  const keeper = new FactorsKeeper(site, null);
  const { series } = prepare(files, site);
  const factors = decodeFactors(keeper.close(series)!, 'factors.swf');
  const archive = archiveOf(values, 2000, 4000);
  const { learnShare: _, calibrateShare: __, ...rest } = FIT_DEFAULTS;
  const options = { ...rest, kind: 'linear' as const };
  const around = { archive, site, previous: null, halfLifeTicks: null };
  // The last 300 ticks judge, and the 300 before them calibrate, either way.
  const whole = await refit(
    { ...around, files, factors: null },
    { ...options, learnShare: 0.85, calibrateShare: 0.075 },
  );
  const after = await refit({ ...around, files: null, factors }, { ...options, learnShare: 0.6, calibrateShare: 0.2 });
  expect(after.fit.earlier).toEqual({ fromTick: START, toTick: START + 2500, ticks: 2500 });
  expect(after.absorbed.series.firstTick).toBe(START + 2500);
  expect(after.fit.judged).toEqual(whole.fit.judged);
  const mean = ({ fit: { hindcast } }: { fit: { hindcast: { mseStandardised: Float64Array; scale: Float64Array } } }) =>
    hindcast.mseStandardised.reduce((sum, mse, cell) => sum + mse * hindcast.scale[Math.floor(cell / 12)]! ** 2, 0);
  const alone = await refit(
    { ...around, files: null, factors: null, fromTick: START + 2500 },
    { ...options, learnShare: 0.6, calibrateShare: 0.2 },
  );
  // Choices are judged on other stretches; what the older readings teach is there all the same.
  expect(mean(after) / mean(whole)).toBeLessThan(1.06);
  expect(mean(after) / mean(alone)).toBeLessThan(0.9);
  expect(after.fit.bundle.provenance.options).toContain(`"earlier":[${START},${START + 2500}]`);
  const next = decodeFactors(after.factors!, 'factors.swf');
  expect([next.fromTick, next.toTick, next.ticks]).toEqual([START, START + 4000, 4000]);
  expect(after.factors!.length).toBeLessThan(1.05 * whole.factors!.length);
});

test('a second thread changes nothing, and makes no one wait for what was made of the fit', {
  timeout: 180_000,
}, async () => {
  const values = plant(11_000, 11_000);
  const first = prepare(historyOf(values, 0, 2000), site);
  const old = await learn(
    { series: first.series, site, survey: first.survey, lattices: first.lattices },
    { ...FIT_DEFAULTS, kind: 'linear' },
  );
  const factors = decodeFactors(new FactorsKeeper(site, null).close(first.series)!, 'factors.swf');
  const { learnShare: _, calibrateShare: __, ...rest } = FIT_DEFAULTS;
  const options = { ...rest, kind: 'linear' as const, useAll: true, learnShare: null, calibrateShare: null };
  const around = {
    archive: archiveOf(values, 0, 11_000),
    site,
    previous: openDocument(old.document),
    halfLifeTicks: null,
  };
  const seen: unknown[] = [];
  const asked = vi.spyOn(SecondThread.prototype, 'ask');
  onTestFinished(() => asked.mockRestore());
  for (const threads of [1, 2] as const) {
    const { fit: result, ...refitted } = await refit(
      { ...around, files: null, factors, threads },
      options,
      async () => [{ path: 'made', bytes: `${threads > 0}` }],
    );
    const { timings: _timings, ...all } = result;
    seen.push({ ...refitted, ...all });
    const whats = asked.mock.calls.map(([what]) => what);
    expect(whats).toEqual(threads === 1 ? [] : ['begin', 'earlier', 'close', 'judging', 'cast']);
  }
  expect(seen[1]).toEqual(seen[0]);
  expect(seen[0]).toMatchObject({ comparison: { seenByPrevious: 0 }, files: [{ path: 'made' }] });
});
