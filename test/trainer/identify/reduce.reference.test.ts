/**
 * Balanced truncation of a bank against GNU Octave 7.3.0 with its control package 3.4.0 (both of Debian 12): `hsvd` and the
 * eigenvalues of `btamodred (sys, n)`, which call SLICOT's AB13AD and AB09ID. To compute again, with A the block diagonal
 * of two channels of diag (.5, .8, .95) and the 2 × 2 turning block of .9 exp (i π/4), B their drives -a g in the columns of
 * their channels, and M(f, k) = (mod (7 f + 3 k + f k, 11) - 5) / 10 for f = 1..10, k = 1..4:
 *   pkg load control; C = (M .* [1, 1/sqrt(2), 1, 1/sqrt(2)])'; sys = ss (A, B, C, zeros (4, 2), 1);
 *   hsvd (sys); abs (eig (btamodred (sys, 4).a)); abs (eig (btamodred (sys, 6).a))
 *
 * Readings that jump once a channel, each jump long forgotten before the next, have the impulse responses for features: the
 * sums of their products are the controllability Gramian that Octave computes.
 */
import { describe, expect, it } from 'vitest';
import { bankRecursion, recursionInput } from '../../../trainer/identify/recursion-moments.ts';
import { balance, reduce } from '../../../trainer/identify/reduce.ts';
import { solveStein } from '../../../trainer/linalg/lyapunov.ts';
import { multiply, transpose } from '../../../trainer/linalg/products.ts';

const turn = 0.9 * Math.SQRT1_2;
const bank = { decays: [0.5, 0.8, 0.95], resonators: [[turn, turn] as const], lags: [] };
const layout = { channelCount: 2, signalCount: 2, featureCount: 5, steps: 2 };
const apart = 1500;
const values = [1, 1 + apart].map((at) => Float64Array.from({ length: 2 * apart }, (_, t) => (t >= at ? 1 : 0)));
const input = recursionInput(values, [{ fromIndex: 1, toIndex: 2 * apart }], bank, 0);
const map = Float64Array.from({ length: 40 }, (_, at) => {
  const f = Math.floor(at / 4) + 1;
  const k = (at % 4) + 1;
  return (((7 * f + 3 * k + f * k) % 11) - 5) / 10;
});
const balanced = balance(input, map, layout);
/** Squared singular values scale with the Gramian, here a mean over the origins. */
const perOrigin = Math.sqrt(input.origins);

describe('balance', () => {
  it("has the Gramian of Octave's dlyap", () => {
    const { drive, modes } = bankRecursion(bank, 2);
    const gramian = solveStein(modes, modes, multiply(drive, transpose(drive, 10, 2), 10, 2, 10));
    const sums = input.covariance.map((mean) => mean * input.origins);
    expect(gramian[1]).toBeCloseTo(0.666666666666667, 12);
    for (const gathered of [gramian, sums]) {
      const trace = Array.from({ length: 10 }, (_, f) => gathered[f * 11]!).reduce((sum, value) => sum + value, 0);
      expect(trace).toBeCloseTo(22.8937581499503, 9);
    }
  });

  it("has the Hankel singular values of Octave's hsvd", () => {
    const expected = [
      7.77234092895, 4.53696721972, 0.580044367535, 0.428685242574, 0.302733884885, 0.282490272104, 0.18373754386,
      0.173168253577, 0.108582067077, 0.0295216791799,
    ];
    // The variances are raised by 1e-9 before they are factored.
    expected.forEach((value, k) => {
      expect(balanced.values[k]! * perOrigin).toBeCloseTo(value, 6);
    });
  });
});

describe('reduce', () => {
  it.each([
    [4, [0.9476034899, 0.9424517107, 0.7636276565, 0.6741946616]],
    [6, [0.9479888525, 0.9443643568, 0.8893523408, 0.8893523408, 0.7278789853, 0.6965382877]],
  ])("of order %i has the poles of Octave's btamodred", (order, expected) => {
    const { modes } = reduce(balanced, order, 0)!.recursion;
    const moduli = [...modes.first.keys()].flatMap((k) => {
      const modulus = Math.hypot(modes.re[k]!, modes.im[k]!);
      return modes.isComplex[k] === 1 ? [modulus, modulus] : [modulus];
    });
    moduli.sort((x, y) => y - x);
    expect(moduli.length).toBe(order);
    moduli.forEach((modulus, k) => {
      expect(modulus).toBeCloseTo(expected[k]!, 6);
    });
  });

  it('of full order loses nothing', () => {
    expect(reduce(balanced, 10, 0)!.error).toBeLessThan(1e-4 * balanced.energy);
  });

  it('loses less the more numbers it has, and improving never loses more', () => {
    const plain = [2, 4, 6, 8].map((order) => reduce(balanced, order, 0)!.error);
    const improved = [2, 4, 6, 8].map((order) => reduce(balanced, order, 6)!.error);
    plain.forEach((error, k) => {
      expect(improved[k]).toBeLessThanOrEqual(error);
      if (k > 0) expect(error).toBeLessThan(plain[k - 1]!);
    });
    expect(improved[1]).toBeLessThan(plain[1]!);
  });
});
