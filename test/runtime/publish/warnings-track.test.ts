/** One limit's warning: when it opens, what is worth saying, when it closes. */
import { describe, expect, test } from 'vitest';
import {
  followed,
  type OpenWarning,
  opened,
  opens,
  renewTicks,
  type Sight,
  tell,
  type WarningEvent,
} from '../../../runtime/publish/warnings-track.ts';

const RULE = { open: 0.5, close: 0.3, hold: 4 };
const H = 60;
const sight = (probability: number, likely: number | null = null, isPast = false): Sight => ({
  probability,
  earliest: null,
  likely,
  latest: null,
  isPast,
});

/** A warning opened and told at tick 100, led along by (tick, sight); every event is told at once. */
function lead(first: Sight, seen: readonly (readonly [number, Sight])[], rule = RULE) {
  const warning: OpenWarning = opened(100, first);
  tell(warning);
  const events: (readonly [number, WarningEvent])[] = [];
  for (const [tick, one] of seen) {
    const event = followed(warning, rule, H, tick, one);
    if (event !== null) {
      events.push([tick, event]);
      tell(warning);
    }
    if (event === 'closed') break;
  }
  return { warning, events };
}

const run = (from: number, count: number, one: Sight) =>
  Array.from({ length: count }, (_, k) => [from + k, one] as const);

describe('opens', () => {
  test('at its probability, on the near side of the limit alone', () => {
    expect(opens(RULE, sight(0.499))).toBe(false);
    expect(opens(RULE, sight(0.5))).toBe(true);
    expect(opens(RULE, sight(1, 1, true))).toBe(false);
  });
  test('never where the rule says 1', () => expect(opens({ ...RULE, open: 1 }, sight(1))).toBe(false));
});

describe('closes', () => {
  test('after so many ticks in a row below the lower probability', () => {
    const { events, warning } = lead(sight(0.5), run(101, 30, sight(0.29)));
    expect(events).toEqual([
      [103, 'news'],
      [104, 'closed'],
    ]);
    expect(warning.sinceTick).toBe(100);
  });
  test('not while it hovers between the two', () => {
    expect(lead(sight(0.5), run(101, 14, sight(0.41))).events).toEqual([]);
  });
  test('one tick above begins the count anew, ticks that nobody looked at count along', () => {
    const { events } = lead(sight(0.35), [...run(101, 3, sight(0.28)), [104, sight(0.3)], [105, sight(0.28)]]);
    expect(events).toEqual([]);
    const skipped = lead(sight(0.35), [
      [101, sight(0.28)],
      [104, sight(0.28)],
    ]);
    expect(skipped.events).toEqual([[104, 'closed']]);
  });
  test('not while the reading lies past the limit, which is news once', () => {
    const { events, warning } = lead(sight(0.9, 5), [
      ...run(101, 3, sight(0.95, 4)),
      ...run(104, 10, sight(0.1, null, true)),
    ]);
    expect(events).toEqual([[104, 'news']]);
    expect(warning.crossedTick).toBe(104);
  });
});

describe('is said again', () => {
  test('when the probability has moved by a tenth, at most every twentieth of the horizon', () => {
    expect(
      lead(sight(0.5), [
        [101, sight(0.7)],
        [102, sight(0.7)],
        [103, sight(0.7)],
        [104, sight(0.79)],
        [109, sight(0.81)],
      ]).events,
    ).toEqual([
      [103, 'news'],
      [109, 'news'],
    ]);
  });
  test('when the likely time has moved by a tenth of the horizon, or appears, or is gone', () => {
    const still = run(101, 13, sight(0.6));
    expect(
      lead(
        sight(0.6, 30),
        still.map(([tick]) => [tick, sight(0.6, 30 - (tick - 100))] as const),
      ).events,
    ).toEqual([]);
    expect(lead(sight(0.6, 30), [[105, sight(0.6, 31)]]).events).toEqual([]);
    expect(lead(sight(0.6, 30), [[105, sight(0.6, 32)]]).events).toEqual([[105, 'news']]);
    expect(lead(sight(0.52, 58), [[105, sight(0.48)]]).events).toEqual([[105, 'news']]);
    expect(lead(sight(0.48), [[105, sight(0.52, 58)]]).events).toEqual([[105, 'news']]);
  });
  test('whatever it says after a quarter of the horizon, 15 ticks at most', () => {
    expect(lead(sight(0.6), run(101, 31, sight(0.6))).events).toEqual([
      [115, 'renewed'],
      [130, 'renewed'],
    ]);
    expect([1, 3, 8, 60, 1024].map(renewTicks)).toEqual([1, 1, 2, 15, 15]);
  });
});
