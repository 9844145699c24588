/** What excluding maintenance does to a fit: as good as a clean history, worse without, deaf to what was excluded. */
import { beforeAll, describe, expect, it } from 'vitest';
import type { Site } from '../../protocol/index.ts';
import type { History } from '../../trainer/history/history.ts';
import { prepare } from '../../trainer/history/load.ts';
import { hindcast } from '../../trainer/judge/hindcast.ts';
import { meanOf } from '../../trainer/judge/scores.ts';
import { FIT_DEFAULTS, type FitResult, fit as fitHistory } from '../../trainer/pipeline.ts';
import { hourlySite, wanderingDays } from '../support/history.ts';
import { seededNumbers } from '../support/models.ts';

const HOUR = 3_600_000;
const FIRST = Date.UTC(2024, 0, 1);
const TICKS = 2400;
const NAMES = ['level', 'flow', 'temp'];
const UNITS = ['1', '1', '1'];
const site = hourlySite(NAMES, 24);
const clean = wanderingDays(3, TICKS, 3);
/** Weeks of maintenance in the learning part, four days in the calibration part. */
const TAUGHT = [
  [240, 408],
  [600, 768],
  [1008, 1176],
  [1584, 1684],
] as const;
/** And in the judged part. */
const JUDGED = [[2112, 2212]] as const;
type Spans = readonly (readonly [number, number])[];

function history(values: readonly Float64Array[]): History {
  const times = Float64Array.from({ length: TICKS }, (_, t) => FIRST + t * HOUR);
  const channels = NAMES.map((name, c) => ({ name, times, values: values[c]! }));
  return { channels, signalCount: 3, files: [], zone: null, clockChanges: [] };
}

/** Within the spans the plant stands empty: two signals at naught, one that wanders about for itself. */
function drained(spans: Spans): Float64Array[] {
  return changed(spans, (c, random) => (c < 2 ? 0 : Math.round(100 * (15 + 3 * random())) / 100));
}

function changed(spans: Spans, value: (channel: number, random: () => number) => number): Float64Array[] {
  const random = seededNumbers(5);
  const values = clean.map((y) => y.slice());
  for (const [from, to] of spans) {
    for (let t = from; t < to; t++) for (let c = 0; c < 3; c++) values[c]![t] = value(c, random);
  }
  return values;
}

function excluding(spans: Spans, signals: readonly string[] | null = null): Site {
  const exclude = spans.map(([from, to]) => ({
    reason: 'overhaul',
    signals,
    fromMs: FIRST + from * HOUR,
    toMs: FIRST + to * HOUR,
  }));
  return { ...site, exclude };
}

function learn(values: readonly Float64Array[], of: Site): Promise<FitResult> {
  const { series, lattices } = prepare(history(values), of, 0.2);
  return fitHistory({ series, site: of, survey: {}, lattices }, { ...FIT_DEFAULTS, kind: 'linear' });
}

const cleanSeries = prepare(history(clean), site, 0.2).series;
const onClean = (result: FitResult) => hindcast(result.model, cleanSeries, { ...result.judged, learn: null }, UNITS);

describe('maintenance in every part of the history', () => {
  let [usual, without, ignored] = [] as unknown as FitResult[];
  beforeAll(async () => {
    const all = [...TAUGHT, ...JUDGED];
    usual = await learn(clean, site);
    without = await learn(drained(all), excluding(all));
    ignored = await learn(drained(all), site);
  });

  it('excluded, the model is as good as of a clean history; not excluded, it is far worse', () => {
    const error = (result: FitResult): number => meanOf(onClean(result).mseStandardised) * result.model.scale[0]! ** 2;
    expect(error(without!) / error(usual!)).toBeLessThan(1.08);
    expect(error(ignored!) / error(usual!)).toBeGreaterThan(1.5);
  });

  it('its bounds are as wide and cover as much', () => {
    const of = (result: FitResult) => onClean(result);
    expect(Math.abs(meanOf(of(without!).coverage) - 0.9)).toBeLessThan(0.025);
    expect(meanOf(of(without!).width) / meanOf(of(usual!).width)).toBeLessThan(1.1);
    expect(meanOf(of(ignored!).width) / meanOf(of(usual!).width)).toBeGreaterThan(1.2);
  });

  it('neither origins nor targets in it are counted, ours or the rivals’', () => {
    const { hindcast: cast } = without!;
    const whole = usual!.hindcast;
    expect(cast.origins).toBe(whole.origins - 100);
    expect(cast.rivals).toEqual(whole.rivals);
    // Step 1 loses its origins inside and the one just before; step 24 its targets inside and its origins inside, 76 of them both.
    expect(whole.count[0]! - cast.count[0]!).toBe(101);
    expect(whole.count[23]! - cast.count[23]!).toBe(124);
    const [from, to] = JUDGED[0]!;
    const start = (FIRST / HOUR + from) * HOUR - cast.fromMs;
    const inside = cast.residuals[0]!.subarray(start / HOUR, start / HOUR + to - from);
    expect(inside.every(Number.isNaN)).toBe(true);
  });

  it('what was left out and why is said, and stands in the provenance', () => {
    expect(without!.warnings.filter((text) => text.includes('excluded'))).toHaveLength(5);
    expect(without!.warnings[0]).toMatch(/^The whole plant: 7 d \(7\.0 %\) excluded .* for "overhaul", 2024-01-11/);
    expect(JSON.parse(without!.bundle.provenance.options)).toMatchObject({
      excluded: { entries: 5, plantTicks: 704, ticksByReason: { overhaul: 704 } },
    });
    expect(JSON.parse(usual!.bundle.provenance.options)).not.toHaveProperty('excluded');
  });
});

describe('whatever the excluded readings are', () => {
  const garbage = (spans: Spans) =>
    changed(spans, (c, random) => (c === 0 ? 1e7 * random() : c === 1 ? -5 : Number.NaN));

  const figures = ({ hindcast: { count, mse, bias, coverage, width, rivalMse, residuals } }: FitResult) => [
    ...[count, mse, bias, coverage, width, rivalMse],
    ...residuals,
  ];

  it('model and bounds are the same; the judge replays what the gateway will see, which remembers an overhaul for days', async () => {
    const one = await learn(drained(TAUGHT), excluding(TAUGHT));
    const other = await learn(garbage(TAUGHT), excluding(TAUGHT));
    const { provenance: p1, judge: j1, ...first } = one.bundle;
    const { provenance: p2, judge: j2, ...second } = other.bundle;
    expect(second).toEqual(first);
    expect(p2.options).toBe(p1.options);
    expect(j2).not.toEqual(j1);
  });

  it('all of it is the same, in the judged part too, where the signals are named', async () => {
    const all = [...TAUGHT, ...JUDGED];
    const one = await learn(drained(all), excluding(all, NAMES));
    const other = await learn(garbage(all), excluding(all, NAMES));
    expect(other.document).toEqual(one.document);
    expect(figures(other)).toEqual(figures(one));
  });
});

it('too much excluded is refused with what is left and what is needed', async () => {
  const most = excluding([[0, 1400]]);
  await expect(learn(clean, most)).rejects.toThrow(
    /exclude leaves 40 of the 1440 ticks to learn from; expected at least \d+\. Exclude less/,
  );
  await expect(learn(clean, excluding([[1930, 2400]]))).rejects.toThrow(/leaves 10 of the 480 ticks to judge by/);
});
