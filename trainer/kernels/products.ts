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
/** Fewer columns than that are narrow. */
const NARROW = 8;
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
  if (n === 1 && addThin(core, c, stride, a, b, m, steps, options.isTaken)) return;
  if (m === 1 && addThin(core, c, 1, b, a, n, steps, options.isTaken)) return;
  // A narrow right factor would leave most of its strips of eight empty: then the other side takes them. The sums are the same.
  if (n < m && n < NARROW && !isLower)
    addPanels(core, scratch, c, 1, stride, b, a, n, m, steps, isLower, options.isTaken);
  else addPanels(core, scratch, c, stride, 1, a, b, m, n, steps, isLower, options.isTaken);
}

/** C += A x without packing; false where the parts do not lie side by side. */
function addThin(
  core: ThinLoops,
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
    core.columnSums(c, from, a.stepStride, x.at + 8 * t, m, Math.min(STEPS, steps - t), sign);
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
  for (let j = 0; j < n; j += COLUMNS) {
    const columns = Math.min(COLUMNS, n - j);
    for (let t = 0; t < steps; t += STEPS) {
      const depth = Math.min(STEPS, steps - t);
      pack(core, scratch, b, j, t, columns, depth, 8);
      for (let i = 0; i < m; i += ROWS) {
        const rows = Math.min(ROWS, m - i);
        if (isLower && i + rows <= j) continue;
        pack(core, left, a, i, t, rows, depth, 2);
        const to = c + 8 * (i * rowStride + j * columnStride);
        const skew = isLower ? i - j : WHOLE;
        core.panels(to, rowStride, columnStride, left, scratch, rows, columns, depth, skew, isTaken ? 1 : 0);
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
