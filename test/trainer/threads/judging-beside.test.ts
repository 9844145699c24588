/** Judging on a second thread, which is that of the last build; `npm test` makes it first. The same work done here is the measure. */
import { expect, it, onTestFinished } from 'vitest';
import { modelFromBundle } from '../../../runtime/filter/index.ts';
import { hindcast } from '../../../trainer/judge/hindcast.ts';
import { reliance } from '../../../trainer/judge/reliance.ts';
import { settle } from '../../../trainer/judge/settle.ts';
import { tryDense } from '../../../trainer/kinds/dense.ts';
import { tryLinear } from '../../../trainer/kinds/linear.ts';
import { FIT_DEFAULTS, fit as fitHistory } from '../../../trainer/pipeline.ts';
import { auditRounding } from '../../../trainer/quantise/audit.ts';
import { JudgingBeside } from '../../../trainer/threads/judging-beside.ts';
import { SecondThread } from '../../../trainer/threads/second-thread.ts';
import { attemptOf } from '../../support/attempt.ts';
import { hourlySite, seriesOf, wanderingDays } from '../../support/history.ts';

const H = 6;
const NAMES = ['level', 'flow'];
const SERIES = seriesOf(NAMES, wanderingDays(2, 1200, 11), 2);
/** Of all tests here: none changes it. */
const attempt = attemptOf(SERIES, H, 0.01);

async function begun(): Promise<JudgingBeside> {
  const beside = new JudgingBeside(Promise.resolve());
  onTestFinished(() => beside.end());
  await beside.begin();
  return beside;
}

it('settles what the main thread would, whatever the kind', async () => {
  const { prepared, split } = attempt;
  const span = {
    fromTick: split.calibrate.fromTick - SERIES.firstTick,
    toTick: split.calibrate.toTick - SERIES.firstTick,
  };
  const wanted = { coverage: 0.8, limits: [{ signal: 0, value: 1, side: 'above' as const }], stuck: prepared.stuck };
  const beside = await begun();
  for (const candidate of [tryLinear(attempt), tryDense(attempt)!]) {
    const here = settle(candidate.rounded, prepared.calm, span, wanted);
    expect(await beside.settle(candidate.rounded, prepared.calm, span, wanted)()).toEqual(here);
  }
});

it('checks as the main thread would', async () => {
  const lattices = NAMES.map(() => ({ step: 0.01, offset: 0 }));
  const { bundle, judged } = await fitHistory(
    { series: SERIES, site: hourlySite(NAMES, H), survey: {}, lattices },
    { ...FIT_DEFAULTS, kind: 'linear' },
  );
  const span = { fromTick: judged.fromTick - SERIES.firstTick, toTick: judged.toTick - SERIES.firstTick };
  const model = modelFromBundle(bundle);
  // Another model in its place: what is told apart must be told apart there too.
  const float = { ...model, mean: model.mean.map((mean) => mean + 0.1) };
  const found = await (await begun()).check(bundle, float, SERIES, span);
  expect(found.audit.ratio).not.toBe(1);
  expect(found.reliance).not.toBeNull();
  expect(found).toEqual({
    audit: auditRounding(model, float, SERIES, span, null),
    reliance: reliance(model, SERIES, span),
  });
});

it('forecasts with another model as the main thread would, also after the checks, on a thread that was there before', async () => {
  const attempt = attemptOf(SERIES, H, 0.01);
  const { rounded } = tryLinear(attempt);
  const clipAs = { ...rounded, clipHigh: rounded.clipHigh.map((high) => high - 1) };
  const span = { ...attempt.split.judged, learn: null, clipAs };
  const second = new SecondThread();
  onTestFinished(() => second.end());
  const beside = new JudgingBeside(second, true);
  await beside.begin();
  const { bundle } = await fitHistory(
    { series: SERIES, site: hourlySite(NAMES, H), survey: {}, lattices: NAMES.map(() => ({ step: 0.01, offset: 0 })) },
    FIT_DEFAULTS,
  );
  await beside.check(bundle, rounded, SERIES, { fromTick: 2400, toTick: 3000 });
  const { horizon, mse, coverage } = hindcast(rounded, SERIES, span, ['1', '1']);
  expect(await beside.cast(rounded, SERIES, span, ['1', '1'])).toEqual({ horizon, mse, coverage });
  await beside.end();
  expect(await second.ask('judging', null)).toBeNull();
});

it('refuses as the main thread does', async () => {
  const { rounded } = tryLinear(attempt);
  const span = { fromTick: 800, toTick: 1000 };
  const short = { ...SERIES, values: SERIES.values.slice(0, 1) };
  const wanted = { coverage: 0.8, limits: [], stuck: attempt.prepared.stuck };
  const here = (): unknown => settle(rounded, short, span, wanted);
  expect(here).toThrow();
  const refused = await (await begun())
    .settle(rounded, short, span, wanted)()
    .catch((error: unknown) => error);
  expect(here).toThrow((refused as Error).message);
});
