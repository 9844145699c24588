/** What a bundle has seen is read from its provenance, or the bundle is refused; never taken as unseen in silence. */
import { describe, expect, test } from 'vitest';
import { learnedSpans } from '../../trainer/learned-spans.ts';
import { syntheticBundle } from '../support/models.ts';

const bundle = syntheticBundle({ signals: ['level', 'flow'] });
const lastTick = Math.round(bundle.provenance.lastMs / bundle.tickMs) + 1;
const having = (options: string) => ({ ...bundle, provenance: { ...bundle.provenance, options } });

describe('spans of time that a bundle has seen', () => {
  test('reach to the end of calibration where that is later than the last reading learned from', () => {
    const calibrate = [lastTick, lastTick + 50];
    expect(learnedSpans(having(JSON.stringify({ learn: [10, 20], calibrate })))).toEqual({
      learn: { fromTick: 10, toTick: 20 },
      seenTo: lastTick + 50,
    });
  });

  test('end with the last reading where nothing else is said', () => {
    expect(learnedSpans(having('{}'))).toEqual({ learn: null, seenTo: lastTick });
  });

  test.each(['', 'null', '7', '{"learn":'])('options %j are refused with what to do', (options) => {
    expect(() => learnedSpans(having(options))).toThrow(/provenance\.options.*fit the site again/);
  });
});
