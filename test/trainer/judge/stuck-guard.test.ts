/** The guard acts where it pays and tells where it does not: through the whole fit. */
import { describe, expect, it } from 'vitest';
import { createState, forecastPath, type Model, update } from '../../../runtime/filter/index.ts';
import { FIT_DEFAULTS, fit as fitHistory } from '../../../trainer/pipeline.ts';
import { hourlySite, seriesOf, wanderingDays } from '../../support/history.ts';

const names = ['level', 'flow'];
const days = wanderingDays(2, 1600, 5);

async function fitted(values: readonly Float64Array[]): Promise<Model> {
  const series = seriesOf(names, values);
  const lattices = names.map(() => ({ step: 0.01, offset: 0 }));
  const input = { series, site: hourlySite(names, 12), survey: {}, lattices };
  return (await fitHistory(input, { ...FIT_DEFAULTS, kind: 'linear' })).model;
}

/** Mean squared error over the last fifth, with each signal hanging for 30 ticks of every 150. */
function errorWhenHung(model: Model): number {
  const state = createState(model);
  const median = new Float64Array(2 * model.horizon);
  let sum = 0;
  for (let t = 0; t + model.horizon < 1600; t++) {
    const hung = (c: number): number => (t >= 1280 && (t + 75 * c) % 150 < 30 ? t - ((t + 75 * c) % 150) : t);
    update(
      model,
      state,
      t,
      Float64Array.from(days, (y, c) => y[Math.max(0, hung(c))]!),
    );
    if (t < 1280) continue;
    forecastPath(model, state, median);
    for (let c = 0; c < 2; c++) {
      for (let h = 1; h <= model.horizon; h++) sum += (days[c]![t + h]! - median[c * model.horizon + h - 1]!) ** 2;
    }
  }
  return sum;
}

describe('settleStuck', () => {
  it('lets it act on a plant that its model knows better than a standing reading does', async () => {
    const model = await fitted(days);
    expect(model.stuck?.acts).toBe(true);
    const { stuck: _stuck, ...without } = model;
    expect(errorWhenHung(model)).toBeLessThan(0.98 * errorWhenHung(without as Model));
  });

  it('costs nothing to the bit where no sensor hangs', async () => {
    const model = await fitted(days);
    const { stuck: _stuck, ...without } = model;
    const [a, b] = [createState(model), createState(without as Model)];
    for (let t = 0; t < 1600; t++) {
      const readings = Float64Array.from(days, (y) => y[t]!);
      update(model, a, t, readings);
      update(without as Model, b, t, readings);
    }
    expect(Array.from(a.value)).toEqual(Array.from(b.value));
    expect(Array.from(a.x)).toEqual(Array.from(b.x));
  });

  it('is not there where a signal stands still by nature', async () => {
    const coarse = days.map((y) => y.map((_, t) => Math.round(10 * Math.sin(t / 400)) / 10 + (t % 97 === 0 ? 1 : 0)));
    expect((await fitted(coarse)).stuck).toBeUndefined();
  });
});
