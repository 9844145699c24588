/** What channels say of each other: found where it is so, left where it is not, and quiet on what comes after. */
import { describe, expect, it } from 'vitest';
import { learnAgreement } from '../../../trainer/identify/agreement.ts';
import { gaussians } from '../../support/gaussian.ts';
import { recurrence } from '../../support/sample-bundle.ts';

const next = recurrence(23);
const normal = gaussians(() => next() / 2 ** 32);
const ticks = 3000;

/** A wander seen by two sensors, and one of its own. */
function channels(noise: number): Float64Array[] {
  let [shared, own] = [0, 0];
  const out = [0, 1, 2].map(() => new Float64Array(ticks));
  for (let t = 0; t < ticks; t++) {
    shared = 0.97 * shared + 0.24 * normal();
    own = 0.97 * own + 0.24 * normal();
    out[0]![t] = shared + noise * normal();
    out[1]![t] = 0.5 - shared + noise * normal();
    out[2]![t] = own;
  }
  return out;
}

const filledOf = (values: readonly Float64Array[]) => ({
  values,
  isRead: values.map((y) => new Uint8Array(y.length).fill(1)),
  inLongGap: new Uint8Array(ticks),
});

describe('learnAgreement', () => {
  const values = channels(0.1);
  const found = learnAgreement(filledOf(values), 3, 1800, 600)!;

  it('watches the two that say the same, and not the one that nobody tells', () => {
    expect(Array.from(found.limit, (limit) => limit > 0)).toEqual([true, true, false]);
    expect(found.weights[1]).toBeCloseTo(-1, 1);
    expect(found.weights[0]).toBe(0);
    expect(Array.from(found.weights.subarray(6))).toEqual([0, 0, 0]);
    // Noise of both sensors: √2 times 0.1.
    expect(found.scale[0]).toBeCloseTo(Math.SQRT2 * 0.1, 2);
    expect(found.offset[0]).toBeCloseTo(0.5, 1);
  });

  it('stays quiet on the rest of the record', () => {
    for (const i of [0, 1]) {
      let [above, below] = [0, 0];
      for (let t = 2400; t < ticks; t++) {
        const told = values.reduce((sum, y, c) => sum + found.weights[i * 3 + c]! * y[t]!, found.offset[i]!);
        const share = Math.max(-4, Math.min(4, (values[i]![t]! - told) / found.scale[i]!));
        above = Math.max(0, above + share - 0.5);
        below = Math.max(0, below - share - 0.5);
        expect(Math.max(above, below)).toBeLessThan(found.limit[i]!);
      }
    }
  });

  it('watches nothing where the channels part by themselves, say too little, or are too seldom read together', () => {
    const parting = channels(0.1);
    for (let t = 1800; t < ticks; t++) parting[1]![t]! += (t - 1800) / 300;
    expect(learnAgreement(filledOf(parting), 3, 1800, 600)).toBeNull();
    expect(learnAgreement(filledOf(channels(2)), 3, 1800, 600)).toBeNull();
    const seldom = filledOf(values);
    seldom.isRead[2]!.fill(0, 100);
    expect(learnAgreement(seldom, 3, 1800, 600)).toBeNull();
    expect(learnAgreement(filledOf([values[0]!]), 1, 1800, 600)).toBeNull();
  });

  it('does not ask of an input that the others tell it', () => {
    const asInput = learnAgreement(filledOf(values), 1, 1800, 600)!;
    expect(asInput.limit.length).toBe(1);
    expect(asInput.weights.length).toBe(3);
  });
});
