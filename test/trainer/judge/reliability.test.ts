/** What is said of crossings against a plant whose true chance of crossing is known by the reflection principle. */
import { describe, expect, it } from 'vitest';
import { CROSSING_KNOTS } from '../../../protocol/index.ts';
import { createBounds, createState, crossing, forecastPath, normalCdf, update } from '../../../runtime/filter/index.ts';
import type { CrossingPair } from '../../../trainer/judge/crossings.ts';
import { crossingTable, reliabilityOf } from '../../../trainer/judge/reliability.ts';
import { gaussians } from '../../support/gaussian.ts';
import { seededNumbers, syntheticModel } from '../../support/models.ts';

const random = seededNumbers(5);

/** Pairs whose chances are p, of which `say(p)` is said. */
const pairsOf = (count: number, say: (p: number) => number): CrossingPair[] =>
  Array.from({ length: count }, () => {
    const p = random();
    return { said: say(p), cameTrue: random() < p, saidStep: null, cameStep: null };
  });

/** What the filter would make of it. */
const put = (table: Float64Array, said: number): number => {
  let k = 1;
  while (said > CROSSING_KNOTS[k]!) k++;
  const [from, to] = [CROSSING_KNOTS[k - 1]!, CROSSING_KNOTS[k]!];
  return table[k - 1]! + ((said - from) / (to - from)) * (table[k]! - table[k - 1]!);
};

describe('reliabilityOf', () => {
  it('finds no gap where what is said is so, and the Brier score of chance', () => {
    const said = reliabilityOf(
      pairsOf(20_000, (p) => p),
      3,
      true,
    );
    expect(said.meanGap).toBeLessThan(0.012);
    // p uniform: the mean of p (1 − p) is 1/6; always saying one half scores 1/4.
    expect(said.brier).toBeCloseTo(1 / 6, 2);
    expect(said.brierOfShare).toBeCloseTo(1 / 4, 2);
    expect(said.bins).toHaveLength(10);
    expect(said.bins.reduce((sum, bin) => sum + bin.count, 0)).toBe(20_000);
  });

  it('finds the gap of a boaster', () => {
    // Says √p: the gap is the mean of √p − p, which is 1/6.
    expect(reliabilityOf(pairsOf(20_000, Math.sqrt), 1, true).meanGap).toBeCloseTo(1 / 6, 2);
  });

  it('takes the time of crossing where one was said and came', () => {
    const pair = (saidStep: number | null, cameStep: number | null): CrossingPair => ({
      said: 0.7,
      cameTrue: cameStep !== null,
      saidStep,
      cameStep,
    });
    const { timed, stepBias, stepError } = reliabilityOf(
      [pair(5, 3), pair(2, 6), pair(4, null), pair(null, 9)],
      1,
      true,
    );
    expect([timed, stepBias, stepError]).toEqual([2, -1, 3]);
  });
});

describe('crossingTable', () => {
  it('puts a boaster right', () => {
    const table = crossingTable(pairsOf(20_000, Math.sqrt), 1);
    for (const said of [0.1, 0.3, 0.5, 0.7, 0.9]) expect(Math.abs(put(table, said) - said * said)).toBeLessThan(0.03);
    expect([table[0], table.at(-1)]).toEqual([0, 1]);
    expect(Array.from(table)).toEqual(Array.from(table).sort((a, b) => a - b));
  });

  it('leaves what is right, and what few pairs speak against', () => {
    const right = crossingTable(
      pairsOf(20_000, (p) => p),
      1,
    );
    const furthest = (table: Float64Array): number =>
      Math.max(...CROSSING_KNOTS.map((knot, k) => Math.abs(table[k]! - knot)));
    expect(furthest(right)).toBeLessThan(0.04);
    const few = crossingTable(pairsOf(20_000, Math.sqrt), 1e-5);
    expect(furthest(few)).toBeLessThan(0.02);
  });
});

it('a random walk: what is said comes true as often, by the reflection principle and by simulation', () => {
  const H = 60;
  const SIGMA = 0.2;
  const base = syntheticModel({ signals: ['level'], horizon: H });
  const model = {
    ...base,
    readout: new Float64Array(base.readout.length),
    radius: Float64Array.from({ length: H }, (_, k) => 1.6448536 * SIGMA * Math.sqrt(k + 1)),
    mean: Float64Array.of(0),
    scale: Float64Array.of(1),
    clipLow: Float64Array.of(-1e3),
    clipHigh: Float64Array.of(1e3),
  };
  const state = createState(model);
  update(model, state, 0, Float64Array.of(0));
  const median = new Float64Array(H);
  forecastPath(model, state, median);
  const normal = gaussians(seededNumbers(23));
  const pairs: CrossingPair[] = [];
  for (const limit of [0.6, 1.2, 2, 3, 4]) {
    const { probability, step } = crossing(model, createBounds(model), state, median, 0, limit, 'above');
    // Of a walk in continuous time, twice the chance of ending beyond (Feller (1968), III.1); a walk in steps crosses later,
    // as if the limit lay 0.5826 σ further (Siegmund, Advances in Applied Probability 11 (1979)).
    const truth = 2 * (1 - normalCdf((limit + 0.5826 * SIGMA) / (SIGMA * Math.sqrt(H))));
    expect(Math.abs(probability - truth)).toBeLessThan(0.065);
    for (let path = 0; path < 1500; path++) {
      let level = 0;
      let cameStep: number | null = null;
      for (let h = 1; h <= H && cameStep === null; h++) {
        level += SIGMA * normal();
        if (level > limit) cameStep = h;
      }
      pairs.push({ said: probability, cameTrue: cameStep !== null, saidStep: step, cameStep });
    }
  }
  expect(reliabilityOf(pairs, 5, true).meanGap).toBeLessThan(0.05);
});
