/**
 * Whether one forecast's errors are smaller than another's by more than chance: the test of Diebold and Mariano on the
 * difference of their losses, origin by origin, with the correction of Harvey, Leybourne and Newbold for forecasts of
 * several steps. Losses of origins less than a horizon apart move together; that is what its long-run variance is for.
 */
import { studentCdf } from './student.ts';

/** What the test says of two series of losses. */
export interface LossTest {
  /** Corrected statistic; below 0 where the first series is smaller. */
  readonly statistic: number;
  /** Chance of a statistic this low, were neither better: small where the first is surely better. */
  readonly pBetter: number;
  /** Chance of one this high: small where the first is surely worse. */
  readonly pWorse: number;
  /** Origins with both losses. */
  readonly origins: number;
  /** How the long-run variance was found: all lags up to the horizon alike, or, where that came out negative, Bartlett's weights. */
  readonly variance: 'truncated' | 'Bartlett';
}

/**
 * Tests; null where fewer origins than two horizons are there, or where the losses do not differ at all.
 *
 * shapes  first, second (n) losses by origin, consecutive; NaN where there is none
 * units   any, the same
 * throws  nothing
 * source  Diebold & Mariano, J. Business & Economic Statistics 13 (1995); Harvey, Leybourne & Newbold, International J. of
 *         Forecasting 13 (1997), equations 8 and 9, Student's t with n − 1 degrees of freedom; Bartlett's weights as Newey &
 *         West, Econometrica 55 (1987)
 * cost    O(n · horizon)
 */
export function compareLosses(first: Float64Array, second: Float64Array, horizon: number): LossTest | null {
  const difference = first.map((loss, t) => loss - second[t]);
  let n = 0;
  let sum = 0;
  for (const d of difference) {
    if (Number.isNaN(d)) continue;
    n++;
    sum += d;
  }
  if (n < Math.max(3, 2 * horizon)) return null;
  const mean = sum / n;
  const lags = autocovariances(difference, mean, n, horizon - 1);
  const longRun = (weight: (lag: number) => number): number =>
    lags.reduce((total, covariance, lag) => total + (lag === 0 ? covariance : 2 * weight(lag) * covariance), 0) / n;
  const truncated = longRun(() => 1);
  const isSound = truncated > 0;
  const variance = isSound ? truncated : longRun((lag) => 1 - lag / horizon);
  if (!(variance > 0)) return null;
  const correction = Math.sqrt((n + 1 - 2 * horizon + (horizon * (horizon - 1)) / n) / n);
  const statistic = (correction * mean) / Math.sqrt(variance);
  const pBetter = studentCdf(statistic, n - 1);
  return {
    statistic,
    pBetter,
    pWorse: studentCdf(-statistic, n - 1),
    origins: n,
    variance: isSound ? 'truncated' : 'Bartlett',
  };
}

/** Lags 0 to `most`, each sum over n; pairs with a loss missing add nothing. */
function autocovariances(values: Float64Array, mean: number, n: number, most: number): Float64Array {
  const centred = values.map((value) => (Number.isNaN(value) ? 0 : value - mean));
  const out = new Float64Array(most + 1);
  for (let lag = 0; lag <= most; lag++) {
    let sum = 0;
    for (let t = lag; t < centred.length; t++) sum += centred[t] * centred[t - lag];
    out[lag] = sum / n;
  }
  return out;
}
