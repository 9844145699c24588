import type { WarningMessage } from '@stillwell/protocol';
import { expect, test } from 'vitest';
import { WarningWatch } from '../../demo-fleet/warning-watch.ts';

type Word = WarningMessage['warnings'][number];

const message = (...warnings: Partial<Word>[]): WarningMessage =>
  ({
    site: 'mill',
    signal: 'level',
    warnings: warnings.map((one) => ({ limit: 'high', since: '2026-03-01T12:00:00Z', crossed_at: null, ...one })),
  }) as WarningMessage;

test('counts lives: opened, crossed once, closed, and what makes no sense', () => {
  const watch = new WarningWatch();
  const crossed = { crossed_at: '2026-03-01T12:20:00Z' };
  watch.hear(message({ status: 'opened' }));
  watch.hear(message({ status: 'opened' }));
  watch.hear(message({ status: 'updated', ...crossed }, { limit: 'high_high', status: 'opened' }));
  watch.hear(message({ status: 'closed', ...crossed }, { limit: 'high_high', status: 'expired' }));
  expect(watch.of('mill')).toEqual({ messages: 4, opened: 2, cameTrue: 1, closed: 1, expired: 1, odd: 0, leads: [20] });

  watch.hear(message({ status: 'closed' }));
  watch.hear(message({ status: 'updated' }));
  watch.hear(message({ status: 'opened' }));
  watch.hear(message({ status: 'opened', since: '2026-03-01T13:00:00Z' }));
  expect(watch.of('mill').odd).toBe(3);
  expect(watch.of('mill').opened).toBe(4);
  expect(watch.of('elsewhere').messages).toBe(0);
});
