/**
 * The places at which lagged sums are kept. Near ones are kept lag by lag. Further out lie panels an eighth as wide as they
 * are far, and a panel keeps its lags spread over Chebyshev points: for any polynomial of their degree, and so to many digits
 * for any function that smooth, the sum over the points equals the sum over the lags. What a bank asks there is smooth: a
 * pole's powers, which by then turn slowly or have died out.
 *
 * ## How many points
 * The bank's resonators turn at most 42 times within their memory (seven periods, six harmonics). One that has not yet fallen
 * to e^-16 at lag l turns at most 42 · 16 · w / l times over w ticks there; a polynomial of degree n follows a wave of c turns
 * over its span once n > π c, and some 20 more points bring it to rounding (Trefethen, Approximation Theory and
 * Approximation Practice, 2013, chapters 3 and 8).
 */

/** Lags from..to-1, kept at `count` places from `place` on. */
export interface Panel {
  readonly from: number;
  readonly to: number;
  readonly place: number;
  readonly count: number;
}

/** All places, ascending by panel; the first `dense` are the lags 0..dense-1 themselves. */
export interface LagGrid {
  readonly dense: number;
  readonly panels: readonly Panel[];
  /** (places) lag of each, whole or not. */
  readonly lags: Float64Array;
}

/** A panel's share of its distance. */
const PANEL_SHARE = 1 / 8;
const TURNS_PER_MEMORY = 42;
const MEMORIES = 16;
const MORE_POINTS = 24;

/**
 * Lays out the places for lags 0..reach.
 *
 * shapes  `leastDense` lags at least are kept one by one
 * units   ticks
 * throws  nothing
 * source  file head
 * cost    O(places)
 */
export function layGrid(reach: number, leastDense: number): LagGrid {
  const panels: Panel[] = [];
  let from = Math.min(reach + 1, Math.max(leastDense, 256));
  // Up to where panels would have as many points as lags.
  while (from <= reach && pointsFor(from) >= widthAt(from)) from += 32;
  const dense = Math.min(reach + 1, from);
  const lags = Array.from({ length: dense }, (_, k) => k);
  for (from = dense; from <= reach; ) {
    const to = Math.min(reach + 1, from + widthAt(from));
    const count = Math.min(to - from, pointsFor(from));
    panels.push({ from, to, place: lags.length, count });
    for (let q = 0; q < count; q++) lags.push(0.5 * (from + to - 1) + 0.5 * (to - 1 - from) * chebyshev(q, count));
    from = to;
  }
  return { dense, panels, lags: Float64Array.from(lags) };
}

function widthAt(lag: number): number {
  return Math.max(16, Math.floor(lag * PANEL_SHARE));
}

function pointsFor(lag: number): number {
  return Math.ceil((Math.PI * TURNS_PER_MEMORY * MEMORIES * widthAt(lag)) / lag) + MORE_POINTS;
}

function chebyshev(q: number, count: number): number {
  return Math.cos((Math.PI * (q + 0.5)) / count);
}

/** Points and barycentric weights of panels with so many points. */
const tables = new Map<number, { readonly points: Float64Array; readonly weights: Float64Array }>();

function tableOf(count: number): { readonly points: Float64Array; readonly weights: Float64Array } {
  let table = tables.get(count);
  if (table === undefined) {
    const points = Float64Array.from({ length: count }, (_, q) => chebyshev(q, count));
    const weights = points.map((_, q) => (q % 2 === 0 ? 1 : -1) * Math.sin((Math.PI * (q + 0.5)) / count));
    table = { points, weights };
    tables.set(count, table);
  }
  return table;
}

/**
 * Lagrange polynomials of a panel's points at one of its lags.
 *
 * shapes  out (points)
 * units   none
 * throws  nothing
 * source  barycentric interpolation: Berrut & Trefethen, SIAM Review 46 (2004), section 5
 * cost    O(points)
 */
export function sharesOf({ from, to, count }: Panel, lag: number, out: Float64Array): void {
  const { points, weights } = tableOf(count);
  const x = to - 1 === from ? 0 : (2 * lag - (from + to - 1)) / (to - 1 - from);
  let sum = 0;
  for (let q = 0; q < count; q++) {
    const away = x - points[q];
    if (away > -1e-14 && away < 1e-14) {
      out.fill(0);
      out[q] = 1;
      return;
    }
    out[q] = weights[q] / away;
    sum += out[q];
  }
  const share = 1 / sum;
  for (let q = 0; q < count; q++) out[q] *= share;
}
