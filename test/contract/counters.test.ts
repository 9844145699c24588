/** What a counter counted a tick: the trainer's histories and the gateway's readings must give the same. */
import fc from 'fast-check';
import { expect, test } from 'vitest';
import { Aligner } from '../../runtime/ingest/align.ts';
import { TickValue } from '../../trainer/history/aggregate.ts';

const TICK_MS = 1000;

test('from the same readings in order, with gaps, wraps and resets, both give the same ticks', () => {
  const reading = fc.record({ afterMs: fc.integer({ min: 1, max: 2500 }), value: fc.integer({ min: 0, max: 999 }) });
  fc.assert(
    fc.property(
      fc.array(reading, { minLength: 1, maxLength: 40 }),
      fc.constantFrom(null, 1000, 65_536),
      (readings, wrap) => {
        const aligner = new Aligner({ tickMs: TICK_MS, latenessMs: 0, aggregates: ['increment'], wraps: [wrap] });
        const tickValue = new TickValue('increment', wrap);
        const learned: number[] = [];
        let timeMs = 0;
        for (const { afterMs, value } of readings) {
          timeMs += afterMs;
          const tick = Math.floor(timeMs / TICK_MS);
          while (learned.length < tick) learned.push(tickValue.close());
          tickValue.add(tick, value);
          aligner.place(0, timeMs, value, null, () => {});
        }
        const first = Math.floor(readings[0]!.afterMs / TICK_MS);
        const served: number[] = [];
        aligner.close(null, ({ values }) => served.push(values[0]!));
        expect(served).toEqual(learned.slice(first));
      },
    ),
    { seed: 20260412, numRuns: 400 },
  );
});
