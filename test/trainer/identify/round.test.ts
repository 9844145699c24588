/** When a round is taken away: for patterns the bank cannot hold, for a trend only beside a pattern, never for noise. */
import { describe, expect, test } from 'vitest';
import { chooseRound, withoutRound } from '../../../trainer/identify/round.ts';
import { gaussians } from '../../support/gaussian.ts';
import { seededNumbers } from '../../support/models.ts';

const HOUR = 3_600_000;
const LEARN = 1800;
const TICKS = 2400;

function chosen(signal: (t: number) => number, periodTicks = 24) {
  const values = [Float64Array.from({ length: TICKS }, (_, t) => signal(t))];
  const filled = { values, isRead: [new Uint8Array(TICKS).fill(1)], inLongGap: new Uint8Array(TICKS) };
  const spans = { learnTicks: LEARN, calibrateTicks: TICKS - LEARN };
  return chooseRound(
    { filled, signalCount: 1, horizon: 12, periodTicks, otherPeriods: [], ...spans, round: null, earlier: null },
    HOUR,
  );
}

const normal = gaussians(seededNumbers(17));
const noise = Float64Array.from({ length: TICKS }, () => normal());
const random = seededNumbers(4);
const week = Float64Array.from({ length: 168 }, () => 4 * random());

describe('a round', () => {
  test('of a week is taken where its days differ', () => {
    const round = chosen((t) => week[t % 168]! + 0.1 * noise[t]!);
    expect(round?.ticks).toBe(168);
    expect([...round!.weight]).toEqual([1]);
  });

  test('is not taken for noise, nor for what only rises', () => {
    expect(chosen((t) => noise[t]!)).toBeNull();
    expect(chosen((t) => 0.1 * t + 0.3 * noise[t]!)).toBeNull();
  });

  test('may count the trend it carries where there is a pattern to be seen', () => {
    const round = chosen((t) => 0.1 * t + 3 * Math.sin((2 * Math.PI * t) / 24) + 0.3 * noise[t]!);
    expect(round?.ticks).toBe(24);
  });

  test('taken away leaves the difference, and shows a gap twice', () => {
    const inLongGap = new Uint8Array(6);
    inLongGap[1] = 1;
    const filled = {
      values: [Float64Array.of(1, 2, 4, 8, 16, 32), Float64Array.of(1, 1, 1, 1, 1, 1)],
      isRead: [],
      inLongGap,
    };
    const rest = withoutRound(filled, { ticks: 3, weight: Float64Array.of(0.5) }, 1);
    expect([...rest.values[0]!]).toEqual([0.5, 1.5, 3.5, 7.5, 15, 30]);
    expect(rest.values[1]).toBe(filled.values[1]);
    expect([...rest.inLongGap]).toEqual([0, 1, 0, 0, 1, 0]);
  });
});
