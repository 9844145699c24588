/** Series for the featured kind's tests. */
import type { Series } from '../../../trainer/history/series.ts';
import { mackeyGlass } from '../../support/chaos.ts';
import { gaussians } from '../../support/gaussian.ts';
import { seriesOf } from '../../support/history.ts';
import { seededNumbers } from '../../support/models.ts';

/** Noise of two hundredths. */
export function chaoticSeries(ticks: number): Series {
  return seriesOf(['x'], [mackeyGlass(3, ticks, 0.02)]);
}

/** A second-order swing driven by noise. */
export function linearSeries(ticks: number): Series {
  const normal = gaussians(seededNumbers(5));
  const y = new Float64Array(ticks);
  for (let t = 2; t < ticks; t++) y[t] = 1.6 * y[t - 1] - 0.8 * y[t - 2] + normal();
  return seriesOf(['y'], [y]);
}
