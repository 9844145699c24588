/**
 * Products of any shape, cut into panels that fit the caches (Goto & van de Geijn 2008): a panel of the right factor stays
 * in the last cache, one of the left in the second, and a strip of eight columns in the first.
 */
import type { Pointer, ProductLoops, ThinLoops } from './core.ts';

/** Steps summed at a time; the order of the sums, and so the bits of a result, hang on this number alone. */
const STEPS = 256;
const ROWS = 64;
const COLUMNS = 512;
/** Bytes of scratch a product needs. */
export const PANEL_BYTES = 8 * STEPS * (ROWS + COLUMNS);
/** Steps from which on sums may be stored down a column instead of along a row. */
const LONG = 64;
/** Longest step, in elements, at which a left factor is read unpacked. */
const DIRECT = 128;
/** A skew so large that no tile lies above the diagonal. */
const WHOLE = 1 << 30;

/** One factor of a product: element (row, step) lies at `at` plus row × rowStride + step × stepStride elements. */
export interface Factor {
  readonly at: Pointer;
  readonly rowStride: number;
  readonly stepStride: number;
  readonly isSingle: boolean;
}

/**
 * C += A B' over the steps of both factors, or C -= A B'.
 *
 * shapes  c (m × n) with `stride` elements from row to row; a (m × steps), b (n × steps)
 * units   any
 * throws  nothing; the caller checked the lengths
 * source  Goto & van de Geijn, ACM TOMS 34 (2008), article 12
 * cost    m n steps multiplications; half of it where only the lower triangle is asked for
 */
export function addProduct(
  core: ProductLoops & ThinLoops,
  scratch: Pointer,
  c: Pointer,
  stride: number,
  a: Factor,
  b: Factor,
  m: number,
  n: number,
  steps: number,
  options: { isLower?: boolean; isTaken?: boolean } = {},
): void {
  const isLower = options.isLower === true;
  if (n === 1 && addThin(core, scratch, c, stride, a, b, m, steps, options.isTaken)) return;
  if (m === 1 && addThin(core, scratch, c, 1, b, a, n, steps, options.isTaken)) return;
  if (!isLower && isTurned(a, b, m, n, steps))
    addPanels(core, scratch, c, 1, stride, b, a, n, m, steps, isLower, options.isTaken);
  else addPanels(core, scratch, c, stride, 1, a, b, m, n, steps, isLower, options.isTaken);
}

/**
 * True where the factors had better change sides, the sums being the same: so that fewer strips of eight are left half
 * empty, or so that the one that can be read unpacked is on the left.
 */
function isTurned(a: Factor, b: Factor, m: number, n: number, steps: number): boolean {
  if (steps < LONG) return n < 8 && n < m;
  const area = (left: number, right: number): number => (left + (left % 2)) * 8 * Math.ceil(right / 8);
  const [straight, turned] = [area(m, n), area(n, m)];
  return straight === turned ? !isDirect(a, m) && isDirect(b, n) : turned < straight;
}

/** Pairs that lie side by side already are read where they are, unless far steps would crowd one set of the cache. */
function isDirect(a: Factor, m: number): boolean {
  return !a.isSingle && a.rowStride === 1 && m % 2 === 0 && a.stepStride <= DIRECT;
}

/** C += A x without packing; false where the parts do not lie side by side. */
function addThin(
  core: ThinLoops,
  scratch: Pointer,
  c: Pointer,
  stride: number,
  a: Factor,
  x: Factor,
  m: number,
  steps: number,
  isTaken = false,
): boolean {
  if (a.isSingle || x.isSingle || x.stepStride !== 1) return false;
  const sign = isTaken ? 1 : 0;
  if (a.stepStride === 1) {
    core.rowDots(c, stride, a.at, a.rowStride, x.at, m, steps, sign);
    return true;
  }
  if (a.rowStride !== 1 || stride !== 1) return false;
  for (let t = 0; t < steps; t += STEPS) {
    const from = a.at + 8 * t * a.stepStride;
    core.columnSums(c, from, a.stepStride, x.at + 8 * t, m, Math.min(STEPS, steps - t), sign, scratch);
  }
  return true;
}

function addPanels(
  core: ProductLoops,
  scratch: Pointer,
  c: Pointer,
  rowStride: number,
  columnStride: number,
  a: Factor,
  b: Factor,
  m: number,
  n: number,
  steps: number,
  isLower: boolean,
  isTaken = false,
): void {
  const left = scratch + 8 * STEPS * COLUMNS;
  const inPlace = isDirect(a, m);
  for (let j = 0; j < n; j += COLUMNS) {
    const columns = Math.min(COLUMNS, n - j);
    for (let t = 0; t < steps; t += STEPS) {
      const depth = Math.min(STEPS, steps - t);
      pack(core, scratch, b, j, t, columns, depth, 8);
      for (let i = 0; i < m; i += ROWS) {
        const rows = Math.min(ROWS, m - i);
        if (isLower && i + rows <= j) continue;
        if (!inPlace) pack(core, left, a, i, t, rows, depth, 2);
        const from = inPlace ? a.at + 8 * (i + t * a.stepStride) : left;
        const [aStrip, aStep] = inPlace ? [2, a.stepStride] : [2 * depth, 2];
        const to = c + 8 * (i * rowStride + j * columnStride);
        const skew = isLower ? i - j : WHOLE;
        core.panels(
          to,
          rowStride,
          columnStride,
          from,
          aStrip,
          aStep,
          scratch,
          rows,
          columns,
          depth,
          skew,
          isTaken ? 1 : 0,
        );
      }
    }
  }
}

function pack(
  core: ProductLoops,
  to: Pointer,
  factor: Factor,
  row: number,
  step: number,
  rows: number,
  steps: number,
  width: number,
): void {
  const { rowStride, stepStride } = factor;
  const offset = row * rowStride + step * stepStride;
  if (factor.isSingle) core.pack32(to, factor.at + 4 * offset, rowStride, stepStride, rows, steps, width);
  else core.pack64(to, factor.at + 8 * offset, rowStride, stepStride, rows, steps, width);
}

/** Copies the lower triangle onto the upper. */
export function mirrorLower(c: Float64Array, n: number): void {
  for (let i = 1; i < n; i++) for (let j = 0; j < i; j++) c[j * n + i] = c[i * n + j];
}
