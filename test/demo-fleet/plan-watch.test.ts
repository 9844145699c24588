import type { ForecastMessage } from '@stillwell/protocol';
import { expect, test } from 'vitest';
import { PlanWatch } from '../../demo-fleet/plan-watch.ts';

type Outlook = NonNullable<ForecastMessage['inputs_ahead']>[number];

function forecast(outlook: Partial<Outlook>, head: Partial<ForecastMessage> = {}): ForecastMessage {
  const one = { input: 'defrost', use: 'planned', plan_error: null, usual_error: 0.08, ...outlook };
  return { ...head, inputs_ahead: [one] } as ForecastMessage;
}

const REASON = 'defrost: what came differs from its plan by 0.2 1 on average; 0.08 1 is usual without a plan';

test('counts by stretch what forecasts say of their plan', () => {
  const watch = new PlanWatch('defrost');
  watch.hear(forecast({ plan_error: 0 }), 'right');
  watch.hear(forecast({ use: 'expected' }), 'right');
  watch.hear(forecast({ plan_error: 0.2 }, { quality: 'S', quality_reason: REASON }), 'wrong');
  watch.hear(forecast({ plan_error: 0.3 }), 'wrong');
  // A letter for another reason, and another input's plan, say nothing of this one.
  watch.hear(
    forecast({ plan_error: 0.01 }, { quality: 'S', quality_reason: 'room: outside the trained range' }),
    'wrong',
  );
  watch.hear(forecast({ input: 'rain', plan_error: 9 }), 'wrong');
  expect(watch.of('right')).toEqual({ forecasts: 2, planned: 1, off: 0, told: 0, worst: 0, usual: 0.08 });
  expect(watch.of('wrong')).toEqual({ forecasts: 4, planned: 3, off: 2, told: 1, worst: 0.3, usual: 0.08 });
  expect(watch.of('never').forecasts).toBe(0);
});
