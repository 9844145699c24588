/** What a terminal is told of a hindcast, by a real one of a few weeks. */
import { expect, it } from 'vitest';
import { judge } from '../../../trainer/judge/gate.ts';
import { hindcast } from '../../../trainer/judge/hindcast.ts';
import { blockText, crossingText, worstText } from '../../../trainer/judge/words.ts';
import { seriesOf, wanderingDays } from '../../support/history.ts';
import { syntheticModel } from '../../support/models.ts';

const HOURS = 900;
const FROM = 500;
const base = syntheticModel({ signals: ['level', 'flow'], horizon: 6, seasonalPeriod: 24 });
// Persistence, on signals about 20 and 25.
const model = {
  ...base,
  tickMs: 3_600_000,
  readout: new Float64Array(base.readout.length),
  mean: Float64Array.of(20, 25),
  scale: Float64Array.of(2, 2),
  clipLow: Float64Array.of(-100, -100),
  clipHigh: Float64Array.of(100, 100),
};
const values = wanderingDays(2, HOURS, 21);
// One wild day of the level, the 31st of January.
for (let t = 30 * 24; t < 31 * 24; t++) values[0]![t]! += t % 2 === 0 ? 6 : -6;
const series = seriesOf(['level', 'flow'], values);
const span = { fromTick: series.firstTick + FROM, toTick: series.firstTick + HOURS };
const cast = (limits: readonly { signal: number; value: number; side: 'above' | 'below' }[]) =>
  hindcast(model, series, { ...span, learn: { fromTick: series.firstTick, toTick: span.fromTick }, limits }, [
    'm',
    'm3/h',
  ]);

it('names the worst day first', () => {
  const [head, columns, , all, level, flow] = worstText(cast([])).split('\n');
  expect(head).toMatch(/were worst/);
  expect(columns).toMatch(/worst first {2}1 /);
  expect(all).toMatch(/^ {2}all signals {2}2024-01-31 \(/);
  expect(level).toMatch(/^ {2}level {8}2024-01-31 \(\d/);
  expect(flow).not.toMatch(/^ {2}flow {9}2024-01-31/);
});

it('lays skill out by stretches, with the chance of so much by luck', () => {
  const lines = blockText(judge(cast([]))).split('\n');
  expect(lines[1]).toMatch(/skill from {2}2024-01-21( {2,}2024-\d\d-\d\d){7} {2,}p$/);
  expect(lines).toHaveLength(5);
  // Ours is persistence: against drift or the day before it cannot be better everywhere.
  for (const line of lines.slice(3)) expect(line).toMatch(/( {2,}-?\d+\.\d %){8} {2,}(< 0\.001|\d\.\d{3})$/);
});

it('says how far crossings can be believed, of declared limits or of usual ones', () => {
  expect(crossingText(cast([]))).toMatch(
    /^Crossings, asked \d+ times of 8 limits put at quantiles, since none is declared: /,
  );
  const declared = cast([{ signal: 0, value: 22, side: 'above' }]);
  expect(crossingText(declared)).toMatch(/of 1 declared limits: \d+\.\d % came; .* Brier score 0\.\d{4} /);
  expect(declared.reliability!.isDeclared).toBe(true);
  expect(crossingText({ ...declared, reliability: null })).toBe('');
});
