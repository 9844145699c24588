/** What rolling origin settles on: the last value where nothing surely beats it, a map where something does. */
import { describe, expect, it } from 'vitest';
import { fillHistory } from '../../../trainer/identify/fill.ts';
import { type LearnOutput, learn } from '../../../trainer/identify/learn.ts';
import { findScalings } from '../../../trainer/identify/scaling.ts';
import { gaussians } from '../../support/gaussian.ts';
import { seriesOf } from '../../support/history.ts';
import { recurrence } from '../../support/sample-bundle.ts';

const H = 12;
const ends = { learnTicks: 1500, calibrateEnd: 2000 };

function learned(channels: readonly Float64Array[]): LearnOutput {
  const series = seriesOf(
    channels.map((_, c) => `y${c}`),
    channels,
  );
  const scalings = findScalings(
    series,
    ends.learnTicks,
    channels.map(() => 0.001),
  );
  const filled = fillHistory(series, scalings, 0, H, ends);
  return learn({
    filled,
    signalCount: channels.length,
    horizon: H,
    periodTicks: 0,
    learnTicks: ends.learnTicks,
    calibrateTicks: ends.calibrateEnd - ends.learnTicks,
  });
}

/** Mean reverting for decay < 1, a random walk for 1. */
function path(decay: number, seed: number): Float64Array {
  const next = recurrence(seed);
  const normal = gaussians(() => next() / 2 ** 32);
  let level = 0;
  return Float64Array.from({ length: 2000 }, () => {
    level = decay * level + normal();
    return level;
  });
}

describe('choose', () => {
  it('keeps the last value of random walks but where chance is one in ten', () => {
    const seeds = [1, 2, 3, 4, 5, 6, 7, 8, 9, 10];
    const choices = seeds.map((seed) => learned([path(1, seed)]));
    const taken = choices.filter(({ choice }) => choice.ownPenalty[0] !== null).length;
    // Binomial, ten trials of a tenth: more than two in 7 % of cases.
    expect(taken).toBeLessThanOrEqual(2);
    const still = choices.find(({ choice }) => choice.ownPenalty[0] === null);
    expect(still?.learned.map.every((value) => value === 0)).toBe(true);
  });

  it('learns a map where there is something to learn', () => {
    const { choice } = learned([path(0.9, 7)]);
    expect(choice.ownPenalty[0]).not.toBeNull();
  });
});
