/** What the judge says of a hindcast, by hand-made tables: two signals, one step, persistence and a window ridge. */
import { describe, expect, it } from 'vitest';
import { judge } from '../../../trainer/judge/gate.ts';
import type { Hindcast } from '../../../trainer/judge/hindcast.ts';

function cast(ours: readonly number[], persistence: readonly number[]): Hindcast {
  const cells = ours.length;
  return {
    signals: ['level', 'flow', 'current'].slice(0, cells),
    units: ['m', 'm3/h', 'A'].slice(0, cells),
    horizon: 1,
    tickMs: 60_000,
    origins: 100,
    fromMs: 0,
    toMs: 6_000_000,
    rivals: ['persistence', 'window ridge'],
    count: new Float64Array(cells).fill(100),
    mse: Float64Array.from(ours),
    mae: new Float64Array(cells),
    bias: new Float64Array(cells),
    mseStandardised: Float64Array.from(ours),
    maeStandardised: new Float64Array(cells),
    // The window ridge is far better than ours: it must not count against it.
    rivalMse: Float64Array.from([...persistence, ...persistence.map((value) => value / 100)]),
    rivalMae: new Float64Array(2 * cells),
    scale: new Float64Array(cells).fill(1),
    nominalCoverage: 0.9,
    coverage: new Float64Array(cells).fill(0.9),
    width: new Float64Array(cells),
    residuals: [],
    paths: [],
    readings: [],
    lossEvery: 1,
    originMs: Float64Array.from({ length: 100 }, (_, k) => (k - 1) * 60_000),
    pathLoss: ours.map((loss) => new Float64Array(100).fill(loss)),
    rivalPathLoss: [...persistence, ...persistence.map((loss) => loss / 100)].map((loss) =>
      new Float64Array(100).fill(loss),
    ),
    reliability: null,
  };
}

describe('the gate', () => {
  it('finds skill over the strongest simple rival', () => {
    const verdicts = judge(cast([0.6, 1.1], [1, 1]));
    expect(verdicts.hasSkill).toBe(true);
    expect(verdicts.meanSkill).toBeCloseTo(0.15, 12);
    expect(verdicts.sentence).toMatch(/^Beats the best obvious guess on 1 of 2 signals/);
    expect(verdicts.signals.map((one) => one.sentence)).toEqual([
      'level: squared error 40 % below persistence one step ahead (sure; better in 8 of 8 stretches); 90 % inside the 90 % bounds.',
      'flow: no better than persistence one step ahead (squared error 10 % above, surely); 90 % inside the 90 % bounds.',
    ]);
  });

  it('takes less than a hundredth for none', () => {
    const verdicts = judge(cast([0.995, 0.991], [1, 1]));
    expect(verdicts.hasSkill).toBe(false);
    expect(verdicts.sentence).toMatch(/^Shows no skill .* it should not be sealed\.$/);
    expect(verdicts.signals[0]!.sentence).toContain('no better than persistence');
    expect(verdicts.signals[0]!.sentence).toContain('(squared error 0.5 % below)');
    expect(judge(cast([0.99, 0.99], [1, 1])).hasSkill).toBe(true);
  });

  it('is not carried by one signal where another loses more', () => {
    expect(judge(cast([0.5, 1.6], [1, 1])).hasSkill).toBe(false);
  });

  it('counts a signal as no worse than twice the guess, and names it', () => {
    // A signal that hardly moves: its persistence errs by next to nothing.
    const verdicts = judge(cast([0.1, 31], [1, 1]));
    expect(verdicts.meanSkill).toBeCloseTo((0.9 - 1) / 2, 12);
    expect(verdicts.hasSkill).toBe(false);
    const carried = judge(cast([0.1, 0.1, 31], [1, 1, 1]));
    expect(carried.meanSkill).toBeCloseTo((0.9 + 0.9 - 1) / 3, 12);
    expect(carried.hasSkill).toBe(true);
    expect(carried.sentence).toMatch(/27 % lower\. The guess is better for current\.$/);
    expect(carried.signals[2]!.sentence).toContain('(squared error 3000 % above)');
  });

  it('tells a sure gain from one that may be chance, and stretches won from stretches lost', () => {
    const base = cast([0.8], [1]);
    const losses = (of: (k: number) => number): Float64Array => Float64Array.from({ length: 100 }, (_, k) => of(k));
    const steady = { ...base, pathLoss: [losses((k) => 0.8 + 0.1 * Math.sin(3 * k))] };
    const sure = judge(steady).signals[0]!;
    expect(sure.sentence).toContain('20 % below persistence one step ahead (sure; better in 8 of 8 stretches);');
    expect(sure.test!.pBetter).toBeLessThan(1e-6);
    // All of the gain comes from one stretch in which the rival failed.
    const luck = {
      ...base,
      pathLoss: [losses((k) => 1.05 + 0.01 * Math.sin(3 * k))],
      rivalPathLoss: [losses((k) => (k === 40 ? 31 : 1)), losses(() => 0.01)],
      mse: Float64Array.of(1.05),
      rivalMse: Float64Array.of(1.3, 0.01),
    };
    const chance = judge(luck).signals[0]!;
    expect(chance.sentence).toContain(
      '19 % below persistence one step ahead (may be chance; better in 1 of 8 stretches);',
    );
    expect(chance.blocks).toHaveLength(8);
    expect(chance.blocks.filter((block) => block.skill > 0)).toHaveLength(1);
    const worse = judge({
      ...steady,
      mse: Float64Array.of(1.2),
      pathLoss: [losses((k) => 1.2 + 0.1 * Math.sin(3 * k))],
    });
    expect(worse.signals[0]!.sentence).toContain('(squared error 20 % above, surely)');
  });

  it('knows nothing of a signal with a handful of readings', () => {
    const few = { ...cast([0.1, 0.5], [1, 1]), count: Float64Array.of(15, 16) };
    const verdicts = judge(few);
    expect(verdicts.meanSkill).toBe(0.5);
    expect(verdicts.sentence).toMatch(/on 1 of 2 signals/);
    expect(verdicts.signals[0]).toMatchObject({
      skill: Number.NaN,
      bestRival: 'none',
      sentence: 'level: too few readings in the judged part, so nothing is known of its skill.',
    });
    const nothing = judge({ ...few, count: new Float64Array(2) });
    expect(nothing.hasSkill).toBe(false);
    expect(nothing.sentence).toMatch(/Shows no skill .*mean skill an unknown share/);
  });

  it('says so where a rival made no error at all', () => {
    const verdicts = judge(cast([0.2, 0], [0, 0]));
    expect(verdicts.hasSkill).toBe(false);
    for (const { sentence } of verdicts.signals) {
      expect(sentence).toMatch(/no better than persistence, which made no error one step ahead;/);
    }
  });
});
