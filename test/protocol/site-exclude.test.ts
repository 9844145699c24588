/** Time that must not teach, as a site file says it: what is taken, what is refused, and what it leaves alone. */
import { describe, expect, test } from 'vitest';
import { schemaHash } from '../../protocol/schema-hash.ts';
import { parseSite } from '../../protocol/site.ts';
import { refusalOf } from '../support/refusal.ts';
import { GOOD } from '../support/site-text.ts';

describe('exclude', () => {
  const withExclude = (entry: string): string => `${GOOD}exclude:\n  - ${entry}\n`;
  const span = 'from: 2026-03-04T06:00:00Z, to: 2026-03-09T16:00:00Z';

  test.each([
    [`{${span}}`, '29:5: exclude[0].reason: expected text, got nothing'],
    [`{${span}, reason: ""}`, 'exclude[0].reason: expected text, got ""'],
    ['{reason: x}', '29:5: exclude[0]: expected from and to, or when, got neither'],
    ['{from: 2026-03-04T06:00:00Z, reason: x}', '29:5: exclude[0]: expected to beside from, got nothing'],
    ['{to: 2026-03-04T06:00:00Z, reason: x}', 'exclude[0]: expected from beside to, got nothing'],
    [
      '{from: 2026-03-04, to: 2026-03-05T00:00:00Z, reason: x}',
      '29:12: exclude[0].from: expected a time with its zone, such as 2026-03-04T06:00:00Z or 2026-03-04T07:00:00+01:00, got "2026-03-04"',
    ],
    ['{from: 2026-02-30T06:00:00Z, to: 2026-03-05T00:00:00Z, reason: x}', 'got "2026-02-30T06:00:00Z"'],
    [
      '{from: 2026-03-09T16:00:00Z, to: 2026-03-09T16:00:00Z, reason: x}',
      'exclude[0].to: expected a time after from, got 2026-03-09T16:00:00.000Z',
    ],
    [
      `{${span}, when: {signal: rain, above: 1}, reason: x}`,
      'exclude[0].from: expected either from and to, or when, got both',
    ],
    [
      `{${span}, after: 1h, reason: x}`,
      'exclude[0].after: expected after only beside when, got it beside from and to; move to instead',
    ],
    ['{when: {signal: rain}, reason: x}', 'exclude[0].when: expected one of the keys above, below, equals, got none'],
    [
      '{when: {signal: rain, above: 1, equals: 2}, reason: x}',
      'exclude[0].when: expected one of the keys above, below, equals, got above and equals',
    ],
    ['{when: {signal: rain, above: "1"}, reason: x}', 'exclude[0].when.above: expected a number, got "1"'],
    [
      '{when: {signal: rian, above: 1}, reason: x}',
      'exclude[0].when.signal: expected the name of a signal or input of this site (did you mean "rain"?), got "rian"',
    ],
    [
      '{when: {signal: rain, above: 1}, after: soon, reason: x}',
      'exclude[0].after: expected a duration such as "10min" or "2h", got "soon"',
    ],
    [
      `{${span}, signals: [level, inflwo], reason: x}`,
      'exclude[0].signals[1]: expected the name of a signal or input of this site (did you mean "inflow"?), got "inflwo"',
    ],
    [`{${span}, signals: [], reason: x}`, 'exclude[0].signals: expected at least 1 entries, got []'],
    [`{${span}, resaon: x}`, 'exclude[0].resaon is not a known key; did you mean "reason"? (and 1 more)'],
    [`{when: {signal: rain, abov: 1}, reason: x}`, 'exclude[0].when.abov is not a known key; did you mean "above"?'],
  ])('%s', (entry, message) => {
    expect(refusalOf(() => parseSite(withExclude(entry), 'site.yaml')).message).toContain(message);
  });

  test('what is right', () => {
    const entries = [
      `{${span}, reason: pump overhaul}`,
      '{from: 2026-05-02T02:00:00+02:00, to: 2026-05-02T01:00:00Z, signals: [level], reason: fouled}',
      '{when: {signal: rain, above: 40}, before: 30min, after: 6h, reason: flood}',
    ];
    expect(parseSite(`${GOOD}exclude:\n${entries.map((entry) => `  - ${entry}\n`).join('')}`).exclude).toEqual([
      { reason: 'pump overhaul', signals: null, fromMs: 1_772_604_000_000, toMs: 1_773_072_000_000 },
      { reason: 'fouled', signals: ['level'], fromMs: 1_777_680_000_000, toMs: 1_777_683_600_000 },
      {
        reason: 'flood',
        signals: null,
        when: { signal: 'rain', is: 'above', level: 40 },
        beforeMs: 1_800_000,
        afterMs: 21_600_000,
      },
    ]);
  });

  test('changes nothing that a bundle is held against', () => {
    const plain = parseSite(GOOD);
    const excluding = parseSite(withExclude(`{${span}, reason: x}`));
    expect(schemaHash(excluding)).toEqual(schemaHash(plain));
  });
});
