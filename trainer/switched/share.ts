/**
 * How much of each forecast comes from the section and how much from the linear model under it: the share, by signal and
 * step, with the least squared error on a part that neither was learned from. Roll-outs are strong while the modes ahead
 * are sure and weak once they are not, so the share falls with the horizon where a plant has forgotten its phase.
 */
import type { Model } from '@stillwell/runtime/filter';
import type { Series } from '../history/series.ts';
import { replayPaths } from '../judge/replay.ts';
import type { TickSpan } from '../span.ts';

/** Steps on each side over which a share is evened out. */
const REACH = 3;
/** Origins looked at, at most. */
const MOST_ORIGINS = 6000;

/** The shares, and what they bring. */
export interface Shares {
  /** (q × H), 0 to 1. */
  readonly share: Float64Array;
  /** (q) squared error with the shares over the linear model's, mean over steps. */
  readonly ratio: Float64Array;
}

/**
 * Finds the shares.
 *
 * shapes  signals (q); both models of the same channels, the section's with shares of one
 * units   standardised
 * throws  FilterError if a model does not fit the series
 * source  combination of forecasts: Bates & Granger, Operational Research Quarterly 20 (1969)
 * cost    two replays of the span
 */
export function findShares(
  linear: Model,
  switched: Model,
  signals: readonly number[],
  series: Series,
  span: TickSpan,
): Shares {
  const H = linear.horizon;
  const cells = signals.length * H;
  const from = span.fromTick - 1;
  const visited = { fromTick: from, toTick: span.toTick - H };
  const stride = Math.max(1, Math.ceil((visited.toTick - from) / MOST_ORIGINS));
  const paths: Float32Array[] = [];
  replayPaths(linear, series, visited, ({ at, median }) => {
    if ((at - from) % stride !== 0) return;
    paths.push(Float32Array.from({ length: cells }, (_, k) => median[signals[Math.floor(k / H)] * H + (k % H)]));
  });
  const sums = { error: new Float64Array(cells), cross: new Float64Array(cells), away: new Float64Array(cells) };
  replayPaths(switched, series, visited, ({ at, median }) => {
    if ((at - from) % stride !== 0 || series.excluded?.isExcluded[at] === 1) return;
    const path = paths[(at - from) / stride];
    for (let k = 0; k < cells; k++) {
      const h = (k % H) + 1;
      const i = signals[Math.floor(k / H)];
      const reading = series.values[i][at + h];
      if (Number.isNaN(reading) || series.excluded?.isExcluded[at + h] === 1) continue;
      const error = (reading - path[k]) / linear.scale[i];
      const away = (median[i * H + h - 1] - path[k]) / linear.scale[i];
      sums.error[k] += error * error;
      sums.cross[k] += error * away;
      sums.away[k] += away * away;
    }
  });
  return settle(sums, signals.length, H);
}

function settle(
  { error, cross, away }: { error: Float64Array; cross: Float64Array; away: Float64Array },
  q: number,
  H: number,
): Shares {
  const share = new Float64Array(q * H);
  const ratio = new Float64Array(q);
  for (let k = 0; k < q; k++) {
    let before = 0;
    let after = 0;
    for (let h = 0; h < H; h++) {
      let top = 0;
      let bottom = 0;
      for (let g = Math.max(0, h - REACH); g <= Math.min(H - 1, h + REACH); g++) {
        top += cross[k * H + g];
        bottom += away[k * H + g];
      }
      const at = k * H + h;
      const s = bottom > 0 ? Math.max(0, Math.min(1, top / bottom)) : 0;
      share[at] = s;
      before += error[at];
      after += error[at] - 2 * s * cross[at] + s * s * away[at];
    }
    ratio[k] = before > 0 ? after / before : 1;
  }
  return { share, ratio };
}
