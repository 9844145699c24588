import { describe, expect, it } from 'vitest';
import { exitCodeOf, expectBetween, expectExactly, verdictTable } from '../../demo-fleet/check.ts';

const kept = expectBetween('a', 'skill above 0', 0.4, [0, 1], (x) => x.toFixed(2));

describe('promises', () => {
  it('are kept inside the span, ends included, and broken outside it', () => {
    expect(kept).toEqual({ subject: 'a', promise: 'skill above 0', outcome: '0.40', isKept: true });
    expect(expectBetween('a', '', 0, [0, 1]).isKept).toBe(true);
    expect(expectBetween('a', '', 1.0001, [0, 1]).isKept).toBe(false);
  });

  it('are never kept by a number that is none', () => {
    const verdict = expectBetween('a', '', Number.NaN, [Number.NEGATIVE_INFINITY, Number.POSITIVE_INFINITY]);
    expect(verdict.isKept).toBe(false);
    expect(verdict.outcome).toBe('none');
  });

  it('on counts are exact and say what was expected', () => {
    expect(expectExactly('a', '', 3, 3).isKept).toBe(true);
    expect(expectExactly('a', '', 2, 3)).toMatchObject({ isKept: false, outcome: '2, expected 3' });
  });

  it('decide the exit code; no promises at all is a failure', () => {
    expect(exitCodeOf([kept])).toBe(0);
    expect(exitCodeOf([kept, expectExactly('b', '', 1, 2)])).toBe(1);
    expect(exitCodeOf([])).toBe(1);
  });

  it('stand in a table that marks the broken ones and closes with a sentence', () => {
    const table = verdictTable([kept, expectExactly('b', 'nothing lost', 1, 0)]);
    expect(table).toMatch(/a +skill above 0 +0\.40 +kept/);
    expect(table).toMatch(/b +nothing lost +1, expected 0 +BROKEN/);
    expect(table).toMatch(/1 of 2 promises broken\.$/);
    expect(verdictTable([kept])).toMatch(/All 1 promises kept\.$/);
  });
});
