/** The regression between channels against a second route: the normal equations, solved by plain elimination. */
import { describe, expect, it } from 'vitest';
import { CrossRegression } from '../../../protocol/segment/cross.ts';

/** Solves A x = b, A symmetric positive definite, by Gauss's elimination. */
function solve(A: number[][], b: number[]): number[] {
  const n = b.length;
  const M = A.map((row, i) => [...row, b[i]!]);
  for (let i = 0; i < n; i++)
    for (let j = i + 1; j < n; j++) {
      const f = M[j]![i]! / M[i]![i]!;
      for (let k = i; k <= n; k++) M[j]![k]! -= f * M[i]![k]!;
    }
  const x = new Array<number>(n).fill(0);
  for (let i = n - 1; i >= 0; i--) {
    let rest = M[i]![n]!;
    for (let k = i + 1; k < n; k++) rest -= M[i]![k]! * x[k]!;
    x[i] = rest / M[i]![i]!;
  }
  return x;
}

const FORGET = 0.998;

describe('residuals of one another', () => {
  it('are regressed as ridge on all that is known before', () => {
    const channels = 3;
    const cross = new CrossRegression(channels);
    const ridge = (i: number): number => (i < channels ? 20 : 1);
    const S = Array.from({ length: 6 }, (_, i) => Array.from({ length: 6 }, (_, j) => (i === j ? ridge(i) : 0)));
    let before = [0, 0, 0];
    for (let t = 0; t < 80; t++) {
      const a = Math.sin(t * 1.7) * 2;
      const now = [a, 0.8 * a + Math.cos(t * 2.3) * 0.3, before[0]! * 0.5 - a + Math.sin(t * 5.1) * 0.2];
      cross.begin();
      for (let c = 0; c < channels; c++) {
        const row = channels + c;
        const known = [...before, ...now.slice(0, c)];
        const weights = solve(
          S.slice(0, row).map((r) => r.slice(0, row)),
          S[row]!.slice(0, row),
        );
        const second = known.reduce((sum, e, i) => sum + e * weights[i]!, 0);
        const first = cross.expected(c);
        // Two routes of about 50 float64 steps each on values near 1.
        expect(first).toBeCloseTo(second, 9);
        cross.observe(c, now[c]!, first);
      }
      cross.end();
      const e = [...before, ...now];
      for (let i = 0; i < 6; i++)
        for (let j = 0; j < 6; j++)
          S[i]![j] = S[i]![j]! * FORGET + e[i]! * e[j]! + (i === j ? (1 - FORGET) * ridge(i) : 0);
      before = now;
    }
  });

  it('stay finite for equal channels, wild values and long rests', () => {
    const cross = new CrossRegression(2);
    for (let t = 0; t < 20_000; t++) {
      cross.begin();
      const value = t === 15_000 ? 1e300 : t < 100 ? t : 0;
      for (let c = 0; c < 2; c++) {
        const expected = cross.expected(c);
        expect(Number.isFinite(expected)).toBe(true);
        cross.observe(c, t % 50 === 0 ? Number.NaN : value, expected);
      }
      cross.end();
    }
  });
});
