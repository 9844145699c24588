/** The judge cannot be fooled by what has seen the judged part: the pipeline leaks nothing, and each planted leak is caught. */
import { describe, expect, it } from 'vitest';
import { quantiseTensor } from '../../../protocol/index.ts';
import { modelFromBundle } from '../../../runtime/filter/index.ts';
import type { Series } from '../../../trainer/history/series.ts';
import { calibrate } from '../../../trainer/judge/calibrate.ts';
import { replay } from '../../../trainer/judge/replay.ts';
import { FIT_DEFAULTS, fit as fitHistory } from '../../../trainer/pipeline.ts';
import { hourlySite, seriesOf, wanderingDays } from '../../support/history.ts';
import { leakedParts, type Work } from '../../support/leak-check.ts';

const H = 6;
const TICKS = 700;
const names = ['level', 'flow', 'valve'];
const values = wanderingDays(3, TICKS, 12);
values[0]!.fill(Number.NaN, 200, 230);
values[1]!.fill(Number.NaN, 535, 543);
const series = seriesOf(names, values, 2);
const site = hourlySite(names.slice(0, 2), H, names.slice(2));
const lattices = names.map(() => ({ step: 0.01, offset: 0 }));
const judgedFrom = Math.round(0.8 * TICKS);

const bundleOf = async (from: Series) =>
  (await fitHistory({ series: from, site, survey: {}, lattices }, { ...FIT_DEFAULTS, kind: 'linear' })).bundle;
const plain: Work = async (from) => ({ bundle: await bundleOf(from), seen: from });

describe('leaks', () => {
  it('are none: nothing learned, set or forecast moves by a bit when the judged part changes or goes', async () => {
    expect(await leakedParts(plain, series, judgedFrom)).toEqual([]);
  });

  it('are caught where a feature sees the future: a column laid one tick too early', async () => {
    const early = (from: Series): Series => {
      const [level, flow, valve] = from.values;
      return { ...from, values: [level!, flow!.map((value, t) => flow![t + 1] ?? value), valve!] };
    };
    const work: Work = async (from) => ({ bundle: await bundleOf(early(from)), seen: early(from) });
    expect(await leakedParts(work, series, judgedFrom)).toContain('forecasts');
  });

  it('are caught where scalings are taken from the whole history', async () => {
    const centred = (from: Series): Series => {
      const value = from.values.map((y) => {
        const known = y.filter((one) => !Number.isNaN(one));
        const mean = known.reduce((sum, one) => sum + one, 0) / known.length;
        return y.map((one) => Math.round(100 * (one - mean)) / 100);
      });
      return { ...from, values: value };
    };
    const work: Work = async (from) => ({ bundle: await bundleOf(centred(from)), seen: centred(from) });
    expect(await leakedParts(work, series, judgedFrom)).toContain('scalings');
  });

  it('are caught where calibration reaches into the judged part', async () => {
    const work: Work = async (from) => {
      const bundle = await bundleOf(from);
      const model = modelFromBundle(bundle);
      const span = { fromTick: Math.round(0.6 * TICKS), toTick: TICKS };
      const { radius } = calibrate({ ...model, rejectSd: 1e12, rejectMaxTicks: 0 }, from, span, 0.9);
      return {
        bundle: { ...bundle, bounds: { ...bundle.bounds, radius: quantiseTensor(radius, 2, H, 'i16') } },
        seen: from,
      };
    };
    expect(await leakedParts(work, series, judgedFrom)).toEqual(['forecasts', 'radii']);
  });
});

it('a forecast and its bounds see nothing after their origin', async () => {
  const model = modelFromBundle(await bundleOf(series));
  const at = (from: Series, origin: number): string => {
    let text = '';
    replay(model, from, { fromTick: origin, toTick: origin + 1 }, ({ median, lower, upper }) => {
      text = [median, lower, upper].map((path) => Buffer.from(path.slice().buffer).toString('hex')).join();
    });
    return text;
  };
  for (const origin of [150, 229, 420, 540, 690]) {
    const after = series.values.map((y) => y.map((value, t) => (t > origin ? 50 - value : value)));
    expect(at({ ...series, values: after }, origin)).toBe(at(series, origin));
    const now = series.values.map((y) => y.map((value, t) => (t === origin ? value + 0.5 : value)));
    // The comparison notices the origin's own reading, where there is one.
    if (!Number.isNaN(values[2]![origin]!)) expect(at({ ...series, values: now }, origin)).not.toBe(at(series, origin));
  }
});
