/**
 * Surprises of perfect plans at replayed origins, and the filters they run through: the filter's own arithmetic, over many
 * origins at once.
 */
import type { Model } from '@stillwell/runtime/filter';
import type { PlanOrigins } from './plan-origins.ts';

/** Expectations of all planned inputs, as they stand after rounding. */
export interface RoundedExpectation {
  readonly curves: number;
  /** (np·curves × q) */
  readonly readout: Float64Array;
  /** (np·curves × H) */
  readonly basis: Float64Array;
}

/** What is looked at is held within this, as in the filter. */
const SEEN_LIMIT = 1000;

/**
 * What truly came less what was expected.
 *
 * shapes  result (n × np·H)
 * units   standardised
 * throws  nothing
 * source  runtime/filter/response.ts
 * cost    O(n np curves (q + H))
 */
export function surprisesOf(
  model: Model,
  origins: PlanOrigins,
  planned: readonly number[],
  { curves, readout, basis }: RoundedExpectation,
): Float64Array {
  const { signalCount: ny, horizon: H } = model;
  const { seen, seenCount: q, now, future } = origins;
  const np = planned.length;
  const out = future.slice();
  const coefficients = new Float64Array(curves);
  for (let n = 0; n < origins.count; n++) {
    for (let p = 0; p < np; p++) {
      for (let k = 0; k < curves; k++) {
        let sum = 0;
        const row = (p * curves + k) * q;
        for (let j = 0; j < q; j++)
          sum += readout[row + j] * Math.min(SEEN_LIMIT, Math.max(-SEEN_LIMIT, seen[(n * np + p) * q + j]));
        coefficients[k] = sum;
      }
      const c = ny + planned[p];
      const low = (model.clipLow[c] - model.mean[c]) / model.scale[c];
      const high = (model.clipHigh[c] - model.mean[c]) / model.scale[c];
      for (let h = 0; h < H; h++) {
        let sum = now[n * np + p];
        for (let k = 0; k < curves; k++) sum += basis[(p * curves + k) * H + h] * coefficients[k];
        out[(n * np + p) * H + h] -= Math.min(high, Math.max(low, sum));
      }
    }
  }
  return out;
}

/**
 * All filters of one surprise.
 *
 * shapes  surprise H numbers from `at`; out (nb + 2 × H): direct, poles in order, running sum over H
 * units   standardised
 * throws  nothing
 * source  runtime/filter/response.ts
 * cost    O(nb H)
 */
export function filterInto(
  surprise: Float64Array,
  at: number,
  horizon: number,
  decays: readonly number[],
  out: Float64Array,
): void {
  for (let h = 0; h < horizon; h++) out[h] = surprise[at + h];
  decays.forEach((a, b) => {
    let memory = 0;
    for (let h = 0; h < horizon; h++) {
      memory = a * memory + (1 - a) * surprise[at + h];
      out[(b + 1) * horizon + h] = memory;
    }
  });
  let sum = 0;
  for (let h = 0; h < horizon; h++) {
    sum += surprise[at + h] / horizon;
    out[(decays.length + 1) * horizon + h] = sum;
  }
}

/**
 * What path and plan together missed.
 *
 * shapes  surprises (n × np·H), gain (ny × np·f), delay (ny × np); result (n × ny·S), NaN where missing
 * units   standardised
 * throws  nothing
 * source  runtime/filter/response.ts
 * cost    O(n np (f H + ny S f)) for f filters
 */
export function unanswered(
  { count, steps, missed }: PlanOrigins,
  surprises: Float64Array,
  {
    gain,
    delay,
    decays,
  }: { readonly gain: Float64Array; readonly delay: Int32Array; readonly decays: readonly number[] },
  ny: number,
  np: number,
  horizon: number,
): Float64Array {
  const f = decays.length + 2;
  const S = steps.length;
  const out = missed.slice();
  const filtered = new Float64Array(f * horizon);
  for (let n = 0; n < count; n++) {
    for (let p = 0; p < np; p++) {
      filterInto(surprises, (n * np + p) * horizon, horizon, decays, filtered);
      for (let i = 0; i < ny; i++) {
        for (let s = 0; s < S; s++) {
          const at = steps[s] - 1 - delay[i * np + p];
          if (at < 0) continue;
          let sum = 0;
          for (let b = 0; b < f; b++) sum += gain[(i * np + p) * f + b] * filtered[b * horizon + at];
          out[(n * ny + i) * S + s] -= sum;
        }
      }
    }
  }
  return out;
}
