/** The warning message: what it looks like, a round trip, and what is refused. */
import { describe, expect, test } from 'vitest';
import { ADVISORY } from '../../protocol/version.ts';
import { type LimitWarning, parseWarningMessage, type WarningFacts, warningMessage } from '../../protocol/warning.ts';
import { head, json, T0 } from '../support/messages.ts';
import { refusalOf } from '../support/refusal.ts';

const open: LimitWarning = {
  limit: 'high',
  side: 'above',
  value: 2.5,
  status: 'opened',
  sinceMs: T0,
  probability: 0.62,
  earliestMs: T0 + 300_000,
  likelyMs: T0 + 1_200_000,
  latestMs: null,
  crossedMs: null,
  reason: null,
};
const gone: LimitWarning = {
  ...open,
  limit: 'low',
  side: 'below',
  value: 1,
  status: 'expired',
  earliestMs: null,
  likelyMs: null,
  crossedMs: T0 - 60_000,
  reason: 'warming up',
};
const facts: WarningFacts = {
  ...head,
  signal: 'level',
  unit: 'm',
  originMs: T0,
  tickMs: 60_000,
  horizon: 60,
  warnings: [open, gone],
};
const bytes = (value: unknown): Uint8Array => new TextEncoder().encode(JSON.stringify(value));

test('what people and PLCs read: how many are open, and each limit with chance and times', () => {
  const message = json(warningMessage(facts));
  expect(message).toMatchObject({
    kind: 'warning',
    advisory: ADVISORY,
    signal: 'level',
    unit: 'm',
    origin: '2026-03-01T12:00:00.000Z',
    tick_s: 60,
    horizon: 60,
    open: 1,
  });
  expect(message.warnings).toEqual([
    {
      limit: 'high',
      side: 'above',
      value: 2.5,
      status: 'opened',
      since: '2026-03-01T12:00:00.000Z',
      probability: 0.62,
      earliest: '2026-03-01T12:05:00.000Z',
      likely: '2026-03-01T12:20:00.000Z',
      latest: null,
      crossed_at: null,
    },
    expect.objectContaining({ status: 'expired', crossed_at: '2026-03-01T11:59:00.000Z', reason: 'warming up' }),
  ]);
  expect(parseWarningMessage(warningMessage(facts))).toEqual(message);
});

describe('refused', () => {
  const message = json(warningMessage(facts)) as Record<string, unknown> & { warnings: Record<string, unknown>[] };
  const withFirst = (more: object) => ({
    ...message,
    warnings: [{ ...message.warnings[0], ...more }, message.warnings[1]],
  });
  test.each<[string, unknown, string]>([
    ['a count that is not that of the list', { ...message, open: 2 }, 'open: expected 1, the open ones listed, got 2'],
    [
      'a limit told of twice',
      withFirst({ limit: 'low' }),
      'warnings[1].limit: expected each limit once, got low again',
    ],
    ['times out of order', withFirst({ likely: '2026-03-01T12:01:00Z' }), 'expected earliest <= likely <= latest'],
    ['a latest without a likely', withFirst({ likely: null, latest: '2026-03-01T12:09:00Z' }), 'earliest <= likely'],
    ['a probability above 1', withFirst({ probability: 1.1 }), 'warnings[0].probability'],
    ['an unknown status', withFirst({ status: 'alarm' }), 'warnings[0].status'],
    ['no list', { ...message, warnings: [], open: 0 }, 'warnings'],
    ['another kind', { ...message, kind: 'forecast' }, 'kind: expected "warning", got "forecast"'],
  ])('%s', (_, value, words) => {
    expect(refusalOf(() => parseWarningMessage(bytes(value))).message).toContain(words);
  });

  test('building from what does not fit together', () => {
    const twice = { ...facts, warnings: [open, open] };
    expect(refusalOf(() => warningMessage(twice)).message).toContain('each limit once');
    expect(refusalOf(() => warningMessage({ ...facts, warnings: [{ ...open, value: Number.NaN }] })).message).toContain(
      'expected a finite number, got NaN',
    );
  });
});
