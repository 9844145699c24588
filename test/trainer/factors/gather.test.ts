/** What goes into factors: chunks of any length, gaps, excluded time, wild readings, signals that stay away. */
import { describe, expect, it } from 'vitest';
import type { Factors } from '../../../trainer/factors/factors.ts';
import { decodeFactors, encodeFactors } from '../../../trainer/factors/file.ts';
import { FactorsGatherer } from '../../../trainer/factors/gather.ts';
import { momentsFromFactors } from '../../../trainer/factors/moments.ts';
import type { Moments } from '../../../trainer/identify/moments.ts';
import {
  direct,
  expectAlike,
  gathered,
  horizon,
  plantValues,
  scalings,
  seriesOf,
  shape,
  signalCount,
  wholeBank,
} from '../../support/factors-history.ts';

const ticks = 2000;
const values = plantValues(ticks);
const TOLERANCE = 1e-11;

function momentsOf(factors: Factors): Moments {
  return momentsFromFactors(factors, { bank: wholeBank, horizon, scalings, signalCount, round: null });
}

function expectSameBytes(a: Factors, b: Factors): void {
  expect(Buffer.compare(encodeFactors(a), encodeFactors(b))).toBe(0);
}

/** The values with gaps from..to-1 in some channels. */
function withGaps(gaps: readonly (readonly [channel: number, from: number, to: number])[]): Float64Array[] {
  const out = values.map((row) => row.slice());
  for (const [c, from, to] of gaps) out[c]!.fill(Number.NaN, from, to);
  return out;
}

describe('chunks', () => {
  const gappy = withGaps([
    [0, 400, 404],
    [1, 700, 730],
    [2, 1000, 1040],
    [0, 1998, 2000],
  ]);
  const whole = gathered(gappy);

  it.each([1, 7, 1000])('of %i ticks give the same sums to rounding', (chunk) => {
    expectAlike(momentsOf(gathered(gappy, chunk).end()), momentsOf(whole.end()), TOLERANCE);
  });

  it('of the same lengths give the same bytes', () => {
    expectSameBytes(gathered(gappy, 300).end(), gathered(gappy, 300).end());
  });

  it('may be looked at on the way', () => {
    const gatherer = new FactorsGatherer(shape);
    for (let t = 0; t < ticks; t += 250) {
      gatherer.take(seriesOf(gappy, t, t + 250));
      gatherer.end();
    }
    expectAlike(momentsOf(gatherer.end()), momentsOf(whole.end()), TOLERANCE);
  });

  const stops = [5, 402, 705, 725, 1020, 1500];
  it.each(stops)('go on after %i ticks from the file', (stop) => {
    const first = new FactorsGatherer(shape);
    first.take(seriesOf(gappy, 0, stop));
    const onward = new FactorsGatherer(shape, decodeFactors(encodeFactors(first.end()), 'a.swf'));
    onward.take(seriesOf(gappy, stop, ticks));
    expectAlike(momentsOf(onward.end()), momentsOf(whole.end()), TOLERANCE);
  });

  it('must not go back', () => {
    const gatherer = gathered(values);
    expect(() => gatherer.take(seriesOf(values, 1999, 2000))).toThrow(/give only what is newer/);
  });
});

describe('gaps', () => {
  it('bridges short ones by a line', () => {
    const filled = values.map((row) => row.slice());
    for (let t = 400; t < 405; t++) {
      filled[1]![t] = values[1]![399]! + ((t - 399) / 6) * (values[1]![405]! - values[1]![399]!);
    }
    const factors = gathered(withGaps([[1, 400, 405]])).end();
    expectAlike(momentsOf(factors), direct(filled, [[0, ticks - 1]], wholeBank), TOLERANCE);
  });

  it('ends the run at a long one and begins the next at rest', () => {
    const factors = gathered(withGaps([[1, 400, 406]]), 150).end();
    const runs = [
      [0, 400],
      [406, ticks - 1],
    ] as const;
    expectAlike(momentsOf(factors), direct(values, runs, wholeBank), TOLERANCE);
  });

  it('leaves no trace of runs as short as the longest horizon', () => {
    const factors = gathered(
      withGaps([
        [0, 400, 410],
        [0, 423, 450],
      ]),
    ).end();
    const runs = [
      [0, 400],
      [450, ticks - 1],
    ] as const;
    expectAlike(momentsOf(factors), direct(values, runs, wholeBank), TOLERANCE);
  });

  it('takes chunks that are not there for a gap', () => {
    for (const missing of [4, 100, 3000]) {
      const gatherer = new FactorsGatherer(shape);
      const moved = seriesOf(values, 500, ticks);
      gatherer.take(seriesOf(values, 0, 500));
      gatherer.take({ ...moved, firstTick: 500 + missing });
      const filled = values.map((row) => {
        const out = new Float64Array(ticks + missing);
        out.set(row.subarray(0, 500));
        for (let k = 0; k < missing; k++)
          out[500 + k] = row[499]! + ((k + 1) / (missing + 1)) * (row[500]! - row[499]!);
        out.set(row.subarray(500), 500 + missing);
        return out;
      });
      const end = ticks + missing - 1;
      const runs: [number, number][] =
        missing < 6
          ? [[0, end]]
          : [
              [0, 500],
              [500 + missing, end],
            ];
      expectAlike(momentsOf(gatherer.end()), direct(filled, runs, wholeBank), TOLERANCE);
    }
  });

  it('holds an input through any gap', () => {
    const held = values.map((row) => row.slice());
    held[2]!.fill(values[2]![799]!, 800, 950);
    const factors = gathered(withGaps([[2, 800, 950]]), 33).end();
    expectAlike(momentsOf(factors), direct(held, [[0, ticks - 1]], wholeBank), TOLERANCE);
  });

  it('keeps excluded time out', () => {
    const series = seriesOf(values);
    const isExcluded = new Uint8Array(ticks).fill(1, 600, 602);
    const gatherer = new FactorsGatherer(shape);
    gatherer.take({ ...series, excluded: { isExcluded, entries: [] } });
    const runs = [
      [0, 600],
      [602, ticks - 1],
    ] as const;
    expectAlike(momentsOf(gatherer.end()), direct(values, runs, wholeBank), TOLERANCE);
  });
});

describe('wild readings', () => {
  it('of a single tick count as missing once the signal is known', () => {
    // Eight stretches of 256 readings are not enough here: a longer record.
    const longer = plantValues(4000);
    const wild = longer.map((row) => row.slice());
    wild[0]![3000] = 9999;
    const calm = longer.map((row) => row.slice());
    calm[0]![3000] = 0.5 * (longer[0]![2999]! + longer[0]![3001]!);
    expectAlike(momentsOf(gathered(wild).end()), direct(calm, [[0, 3999]], wholeBank), TOLERANCE);
  });

  it('that stay are steps and are kept', () => {
    const longer = plantValues(4000);
    for (let t = 3000; t < 4000; t++) longer[0]![t]! += 500;
    expectAlike(momentsOf(gathered(longer).end()), direct(longer, [[0, 3999]], wholeBank), TOLERANCE);
  });
});
