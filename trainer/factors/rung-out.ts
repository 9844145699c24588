/**
 * Runs whose ends are no longer known one by one. Of them there is left, summed over all, what each channel's level was at the end
 * together with every channel's last changes. Their features run on after the end as if nothing changed any more, and ring out;
 * their levels count up to the last tick and not beyond, for which these sums are needed. So the moments stay those of a true
 * history, with some ticks more in which everything stood still.
 */
import type { Factors, RunEnd } from './factors.ts';

/** Sums over the runs that rang out, each weighted by its last tick's age. */
export interface RungOut {
  /** (nc × nc × places) u_c at the last tick times the changes of channel d by their age; entry (c·nc + d)·places + place. */
  readonly levels: Float64Array;
  /** (nc × nc × places) the same with 1 in place of u_c, where c was there. */
  readonly changes: Float64Array;
}

/**
 * Adds one more run to those that rang out, in place where there are some.
 *
 * shapes  as RungOut
 * units   raw
 * throws  nothing
 * source  definition
 * cost    O(nc² places), of a short run those it reaches
 */
export function ringOut(into: RungOut | null, { weight, isThere, level, changes }: RunEnd): RungOut {
  const nc = level.length;
  const all = changes.length;
  const sums = into ?? { levels: new Float64Array(nc * all), changes: new Float64Array(nc * all) };
  const places = all / nc;
  for (let d = 0; d < nc; d++) {
    const from = d * places;
    // Of a run shorter than the reach the furthest places hold nothing.
    let to = from + places;
    while (to > from && changes[to - 1] === 0) to--;
    for (let c = 0; c < nc; c++) {
      if (isThere[c] === 0) continue;
      for (let k = from; k < to; k++) {
        const value = weight * changes[k];
        sums.levels[c * all + k] += level[c] * value;
        sums.changes[c * all + k] += value;
      }
    }
  }
  return sums;
}

/**
 * Makes them lighter, in place.
 *
 * shapes  as RungOut
 * units   raw
 * throws  nothing
 * source  none
 * cost    O(nc² places)
 */
export function scaleRungOut(sums: RungOut | null, factor: number): void {
  if (sums === null) return;
  for (const row of [sums.levels, sums.changes]) for (let k = 0; k < row.length; k++) row[k] *= factor;
}

/**
 * Those of two spans together, the first as heavy as `factor` says and both counted from the same offsets.
 *
 * shapes  as RungOut
 * units   raw
 * throws  nothing
 * source  sums are additive
 * cost    one copy
 */
export function addRungOut(a: RungOut | null, factor: number, b: RungOut | null): RungOut | null {
  if (a === null) return b;
  const add = (x: Float64Array, y: Float64Array | undefined): Float64Array =>
    x.map((value, k) => factor * value + (y === undefined ? 0 : y[k]));
  return { levels: add(a.levels, b?.levels), changes: add(a.changes, b?.changes) };
}

/**
 * The same with levels counted from offsets lower by `moved`.
 *
 * shapes  moved (nc)
 * units   raw
 * throws  nothing
 * source  definition
 * cost    one copy
 */
export function moveRungOut({ rungOut }: Factors, moved: Float64Array): RungOut | null {
  if (rungOut === null) return null;
  const each = rungOut.levels.length / moved.length;
  const levels = rungOut.levels.map((value, k) => value + moved[Math.floor(k / each)] * rungOut.changes[k]);
  return { levels, changes: rungOut.changes };
}
