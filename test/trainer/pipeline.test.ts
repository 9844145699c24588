/** The whole fit: the same bytes for the same input, skill where there is something to know, plain refusals where not. */
import { describe, expect, it } from 'vitest';
import { bundleDigest, encodeBundle } from '../../protocol/index.ts';
import { runProbe } from '../../runtime/filter/index.ts';
import { TrainError } from '../../trainer/errors.ts';
import type { Series } from '../../trainer/history/series.ts';
import { replayError } from '../../trainer/judge/replay-scores.ts';
import { FIT_DEFAULTS, type FitOptions, type FitResult, fit as fitHistory } from '../../trainer/pipeline.ts';
import { expectFiniteBundle } from '../support/finite.ts';
import { gaussians } from '../support/gaussian.ts';
import { hourlySite, seriesOf, wanderingDays } from '../support/history.ts';
import { recurrence } from '../support/sample-bundle.ts';

const names = ['level', 'flow', 'outdoor'];
const site = hourlySite(names.slice(0, 2), 12, names.slice(2));
const lattice = { step: 0.01, offset: 0 };

const days = wanderingDays(3, 1500, 21);
const series = seriesOf(names, days, 2);

/** Of the linear kind, unless the options say another: most of what is checked here is common to all kinds. */
function run(of: Series, options: Partial<FitOptions> = {}, horizon = 12): Promise<FitResult> {
  const inputs = of.names.slice(of.signalCount);
  const forSite = hourlySite(of.names.slice(0, of.signalCount), horizon, inputs);
  return fitHistory(
    { series: of, site: forSite, survey: { note: 'none' }, lattices: of.names.map(() => lattice) },
    { ...FIT_DEFAULTS, kind: 'linear', ...options },
  );
}

/** The history as it is, fitted once for all that hold another against it. */
let fitted: Promise<FitResult> | null = null;
function clean(): Promise<FitResult> {
  fitted ??= run(series);
  return fitted;
}

async function refusal(of: Series, options: Partial<FitOptions> = {}, horizon = 12): Promise<TrainError> {
  try {
    await run(of, options, horizon);
  } catch (error) {
    if (error instanceof TrainError) return error;
    throw error;
  }
  throw new Error('expected a refusal, got a fit');
}

const replaced = (channel: number, change: (value: number, t: number) => number): Series =>
  seriesOf(
    names,
    days.map((y, c) => (c === channel ? y.map(change) : y)),
    2,
  );

describe('fit', () => {
  it('beats the obvious guesses where there is something to know, within the bytes', async () => {
    const result = await run(series, { kind: 'auto' });
    expect(result.verdicts.hasSkill).toBe(true);
    expect(result.verdicts.meanSkill).toBeGreaterThan(0.2);
    expect(result.document.length).toBeLessThan(24 * 1024);
    expect(result.audit.ratio).toBeLessThan(1.01);
    expect(result.chosen.periodTicks).toBe(24);
    for (const verdict of result.verdicts.signals) {
      // 290 origins, neighbours alike: six points are two standard errors or so.
      expect(Math.abs(verdict.coverage - 0.9)).toBeLessThan(0.06);
    }
    expect(Array.from(encodeBundle(result.bundle))).toEqual(Array.from(result.document));
    expect(runProbe(result.model, 1, 96).last).toEqual(result.bundle.probe.last);
  });

  it('gives the same bytes for the same input and seed, others for another seed', async () => {
    const short = seriesOf(
      names,
      days.map((y) => y.slice(0, 480)),
      2,
    );
    const of = (seed: number): Promise<FitResult> => run(short, { kind: 'auto', seed });
    const [first, second, third] = [await of(1), await of(1), await of(2)];
    expect(Buffer.from(bundleDigest(first.document)).equals(bundleDigest(second.document))).toBe(true);
    expect(Buffer.from(first.document).equals(third.document)).toBe(false);
  });

  it('keeps to a smaller byte limit, seal included', async () => {
    const result = await run(series, { maxBytes: 6000 });
    expect(result.document.length).toBeLessThanOrEqual(6000 - 56 - 4 * 72);
    expect(result.verdicts.hasSkill).toBe(true);
  });

  it('shows no skill on a plain random walk, and says so', async () => {
    const next = recurrence(13);
    const normal = gaussians(() => next() / 2 ** 32);
    let level = 0;
    const walk = Float64Array.from({ length: 3000 }, () => {
      level += normal();
      return Math.round(100 * level) / 100;
    });
    const result = await run(seriesOf(['walk'], [walk]));
    expect(result.verdicts.hasSkill).toBe(false);
    expect(result.verdicts.sentence).toMatch(/no skill/);
    expect(result.verdicts.signals[0]!.sentence).toMatch(/^walk: no better than/);
  });

  it('does not take a record that only ever rose for a law that it will', async () => {
    const next = recurrence(39);
    const normal = gaussians(() => next() / 2 ** 32);
    let level = 0;
    let rate = 0;
    const risen = Float64Array.from({ length: 3000 }, (_, t) => {
      rate = 0.99 * rate + 0.002 * normal();
      level += t < 2450 ? 0.06 + rate : t < 2550 ? -0.5 : 0.02 * normal();
      return Math.round(100 * level) / 100;
    });
    const { hindcast } = await run(seriesOf(['level'], [risen]));
    const mean = (values: Float64Array, from = 0): number =>
      values.subarray(from, from + 12).reduce((sum, value) => sum + value, 0);
    const rival = hindcast.rivals.indexOf('persistence');
    // The fall itself is foreseen once it is under way; a learned rise of its own shows before, and again when it is over.
    expect(mean(hindcast.mse) / mean(hindcast.rivalMse, 12 * rival)).toBeLessThan(0.4);
  });

  it('carries lags through to the gateway where the plant needs them: what flows in shows five ticks later', async () => {
    const next = recurrence(41);
    const normal = gaussians(() => next() / 2 ** 32);
    const flow = Float64Array.from({ length: 3000 }, () => Math.round(100 * normal()) / 100);
    const level = flow.map((_, t) => Math.round(100 * (2 * (flow[t - 5] ?? 0) + normal())) / 100);
    const result = await run(seriesOf(['level', 'flow'], [level, flow], 1), { kind: 'linear' });
    expect(result.chosen.bank).toMatch(/lags/);
    // Three steps ahead only the noise of variance 1 is unknown, of 5 in all: 590 origins, so three standard errors are 0.17;
    // a hundred weights learned from 1800 ticks cost 0.06 more.
    expect(result.hindcast.mse[2]).toBeGreaterThan(0.83);
    expect(result.hindcast.mse[2]).toBeLessThan(1.23);
  });

  it('is not thrown by one wild spell among the readings it learns from', async () => {
    const wild = replaced(0, (value, t) => (t >= 500 && t < 510 ? value + 15 + 5 * (t % 2) : value));
    const [usual, result] = [await clean(), await run(wild)];
    expect(result.warnings.join(' ')).toMatch(/level: jumps away and back as nowhere else at 2024-01-21T20:00/);
    expect(result.model.scale[0]! / usual.model.scale[0]!).toBeCloseTo(1, 2);
    expect(result.verdicts.signals[0]!.skill).toBeGreaterThan(0.98 * usual.verdicts.signals[0]!.skill);
  });

  it('learns through gaps, spikes and a level no one believes', async () => {
    const next = recurrence(17);
    const torn = replaced(0, (value, t) => {
      if (next() < 2 ** 32 * 0.2) return Number.NaN;
      if (t > 400 && t < 480) return Number.NaN;
      return t === 700 || t === 1350 ? 1e12 : value;
    });
    const usual = await clean();
    const result = await run(torn);
    expect(result.verdicts.hasSkill).toBe(true);
    expect(result.warnings.join(' ')).toMatch(/level: 2 readings lie outside/);
    // The spikes would move mean and scale by 1e9.
    expect(Math.abs(result.model.scale[0]! / usual.model.scale[0]! - 1)).toBeLessThan(0.05);
    expect(result.verdicts.signals[0]!.skill).toBeGreaterThan(0.7 * usual.verdicts.signals[0]!.skill);
  });

  it.each([1, 12])('does not pass over a plant that switches by itself, horizon %d', async (horizon) => {
    const next = recurrence(31);
    let level = 2;
    let isOn = false;
    const wells = Float64Array.from({ length: 2400 }, () => {
      if (level > 3) isOn = true;
      if (level < 1) isOn = false;
      level += 0.02 * (1 + (next() / 2 ** 32) * 0.1 - (isOn ? 2.4 : 0));
      return Math.round(1000 * level) / 1000;
    });
    const result = await run(seriesOf(['level'], [wells]), {}, horizon);
    expect(result.verdicts.hasSkill).toBe(true);
    // A filter that passes the plant's own turns over is off by metres at the next tick; the plant moves 0.03 a tick.
    expect(Math.sqrt(result.hindcast.mse[0]!)).toBeLessThan(0.02);
  });

  it('keeps forecasts and bounds inside the range that the site file declares', async () => {
    const ranged = { ...site, signals: site.signals.map((one) => ({ ...one, range: [18, 31] as const })) };
    const input = { series, site: ranged, survey: {}, lattices: names.map(() => lattice) };
    const options = { ...FIT_DEFAULTS, kind: 'linear' as const };
    const { model, hindcast } = await fitHistory(input, options);
    expect(Array.from(model.clipLow.subarray(0, 2), (low) => low >= 18)).toEqual([true, true]);
    expect(Array.from(model.clipHigh.subarray(0, 2), (high) => high <= 31)).toEqual([true, true]);
    expect(model.clipLow[0]).toBe(18);
    for (const { lower, upper } of hindcast.paths) {
      expect(Math.min(...lower)).toBeGreaterThanOrEqual(18);
      expect(Math.max(...upper)).toBeLessThanOrEqual(31);
    }
    const summed = { ...ranged, signals: ranged.signals.map((one) => ({ ...one, aggregate: 'sum' as const })) };
    expect((await fitHistory({ ...input, site: summed }, options)).model.clipLow[0]).toBeLessThan(18);
  });

  it('gives a signal that is silent while bounds are set the spread of the learning part, and says so', async () => {
    const result = await run(replaced(1, (value, t) => (t >= 900 && t < 1200 ? Number.NaN : value)));
    expect(result.warnings.join(' ')).toMatch(/flow has no reading in the part that sets the bounds/);
    // 1.645: normal quantile of 0.95, any table of the normal distribution
    for (const radius of result.model.radius.subarray(12, 24)) expect(radius).toBeCloseTo(1.645, 3);
    expect(result.model.residualScale[1]).toBe(1);
    expect(result.verdicts.signals[1]!.coverage).toBeGreaterThan(0.9);
  });

  it('learns from all of it as it was judged where readings are missing', async () => {
    const next = recurrence(29);
    const torn = replaced(0, (value) => (next() < 2 ** 32 * 0.3 ? Number.NaN : value));
    const whole = await run(torn, { useAll: true });
    const later = seriesOf(
      names,
      torn.values.map((y) => y.slice(300)),
      2,
    );
    const scored = (model: FitResult['model']): number => replayError(model, later, { fromTick: 900, toTick: 1200 });
    expect(scored(whole.model)).toBeLessThan(1.02 * scored((await run(torn)).model));
  });

  it('keeps one constant signal, with a note, and forecasts its value', async () => {
    const result = await run(replaced(1, () => 7.25));
    expect(result.warnings.join(' ')).toMatch(/flow keeps one value/);
    expect(result.hindcast.mse[12 + 5]).toBe(0);
  });

  it('stands copies of one signal and units a billion apart', async () => {
    const copies = seriesOf(names, [days[0]!, days[0]!, days[0]!.map((value) => value * 1e9)], 2);
    const result = await run(copies);
    expect(result.verdicts.hasSkill).toBe(true);
    expectFiniteBundle(result.bundle);
  });

  it('learns once more from all of it when asked, and keeps what was judged', async () => {
    const [parted, whole] = [await clean(), await run(series, { useAll: true })];
    expect(whole.bundle.judge).toEqual(parted.bundle.judge);
    expect(whole.bundle.linear!.bottleneck.data).not.toEqual(parted.bundle.linear!.bottleneck.data);
    expect(whole.bundle.provenance.lastMs).toBe((series.firstTick + series.ticks - 1) * series.tickMs);
  });
});

describe('refusals', () => {
  it('names a signal without readings', async () => {
    const error = await refusal(replaced(1, () => Number.NaN));
    expect(error.code).toBe('history');
    expect(error.message).toMatch(/Signal flow: expected at least 16 readings .* got 0\. Check its column/);
  });

  it('says of a long history that only its newest ticks count for whether a signal is there', async () => {
    const given = { series: replaced(1, () => Number.NaN), site, survey: {}, lattices: names.map(() => lattice) };
    const earlierToCome = Promise.resolve(null);
    await expect(fitHistory({ ...given, earlierToCome }, FIT_DEFAULTS)).rejects.toThrow(
      'got 0. This history is long, and of a long one only the newest 1,500 ticks count for whether a signal is there: ' +
        'one that stopped before them cannot be learned. Check its column',
    );
  });

  it('refuses a history in which nothing moves', async () => {
    const still = seriesOf(['a', 'b'], [new Float64Array(800).fill(1), new Float64Array(800).fill(2)]);
    expect((await refusal(still)).message).toMatch(/Every signal \(a, b\) keeps one value/);
  });

  it('says how many ticks there are and how many are needed', async () => {
    const short = seriesOf(
      names,
      days.map((y) => y.slice(0, 150)),
      2,
    );
    expect((await refusal(short)).message).toMatch(
      /holds 150 ticks of 3600 s; expected at least 180 for a horizon of 12/,
    );
  });

  it('refuses a horizon longer than the history', async () => {
    const short = seriesOf(
      names,
      days.map((y) => y.slice(0, 150)),
      2,
    );
    expect((await refusal(short, {}, 150)).message).toMatch(
      /horizon of 150 ticks is longer than the history of 150 ticks/,
    );
  });

  it('refuses options outside their ranges', async () => {
    expect((await refusal(series, { learnShare: 0.8, calibrateShare: 0.2 })).message).toMatch(/less than 1/);
    expect((await refusal(series, { maxBytes: 100 })).message).toMatch(/--max-bytes: expected 2048 to 65536/);
    expect((await refusal(series, { maxBytes: 2100 })).message).toMatch(
      /--max-bytes: expected room for at least one state/,
    );
  });
});

it('the site of these tests has an input', () => {
  expect(site.inputs.map((input) => input.name)).toEqual(['outdoor']);
});
