/**
 * Products of a few long rows, which is all that an incremental decomposition of wide rows does: rows against rows, and
 * rows made of other rows. Rows lie one after another in one buffer. Worked in panels of columns that stay in cache, several
 * rows at a time, so that memory is read once for each pass. Not for square matrices.
 */

/** Columns worked on together: 64 rows of it are 256 KiB, within the second cache. */
const PANEL = 512;

/**
 * Products of rows with rows over their whole length, C = A B'.
 *
 * shapes  buffer of rows of `columns`; A is rows a … a + m − 1 of it, B rows b … b + k − 1; out (m × k)
 * units   as the rows' product
 * throws  nothing
 * source  definition
 * cost    m k columns multiplications; allocates nothing
 */
export function rowProducts(
  buffer: Float64Array,
  columns: number,
  a: number,
  m: number,
  b: number,
  k: number,
  out: Float64Array,
): void {
  out.fill(0, 0, m * k);
  for (let from = 0; from < columns; from += PANEL) {
    const width = Math.min(PANEL, columns - from);
    for (let j = 0; j < k; j += 2) {
      const two = j + 1 < k ? columns : 0;
      const b0 = (b + j) * columns + from;
      for (let i = 0; i < m; i += 2) {
        addTwoByTwo(buffer, (a + i) * columns + from, i + 1 < m ? columns : 0, b0, two, width, out, i * k + j, k);
      }
    }
  }
}

/** A row short of two is taken twice and its second product left out. */
function addTwoByTwo(
  x: Float64Array,
  a0: number,
  aNext: number,
  b0: number,
  bNext: number,
  width: number,
  out: Float64Array,
  at: number,
  k: number,
): void {
  let s00 = 0;
  let s01 = 0;
  let s10 = 0;
  let s11 = 0;
  for (let c = 0; c < width; c++) {
    const p = x[a0 + c];
    const q = x[a0 + aNext + c];
    const u = x[b0 + c];
    const v = x[b0 + bNext + c];
    s00 += p * u;
    s01 += p * v;
    s10 += q * u;
    s11 += q * v;
  }
  out[at] += s00;
  if (bNext !== 0) out[at + 1] += s01;
  if (aNext !== 0) out[at + k] += s10;
  if (aNext !== 0 && bNext !== 0) out[at + k + 1] += s11;
}

/**
 * Rows become combinations of rows, in place: row t + i ← Σ_j coefficients[i, j] · row f + j, the old ones on the right.
 * With `isAdded` the combination is added to what stands there, and the rows written must not be among those read.
 *
 * shapes  buffer of rows of `columns`; coefficients (count × from); rows f … f + from − 1 read, t … t + count − 1 written
 * units   as the rows'
 * throws  nothing
 * source  definition
 * cost    count · from · columns multiplications; scratch of count × 512
 */
export function combineRows(
  buffer: Float64Array,
  columns: number,
  f: number,
  from: number,
  coefficients: Float64Array,
  t: number,
  count: number,
  isAdded: boolean,
  scratch: Float64Array,
): void {
  for (let start = 0; start < columns; start += PANEL) {
    const width = Math.min(PANEL, columns - start);
    scratch.fill(0, 0, count * width);
    for (let i = 0; i < count; i++) {
      const row = i * from;
      let j = 0;
      for (; j + 3 < from; j += 4) {
        addFour(scratch, i * width, buffer, (f + j) * columns + start, columns, width, coefficients, row + j);
      }
      for (; j < from; j++) addOne(scratch, i * width, buffer, (f + j) * columns + start, width, coefficients[row + j]);
    }
    for (let i = 0; i < count; i++) {
      const to = (t + i) * columns + start;
      if (isAdded) for (let c = 0; c < width; c++) buffer[to + c] += scratch[i * width + c];
      else buffer.set(scratch.subarray(i * width, (i + 1) * width), to);
    }
  }
}

/** Length of the scratch that `combineRows` needs for so many rows. */
export function scratchLength(count: number, columns: number): number {
  return count * Math.min(PANEL, columns);
}

function addFour(
  out: Float64Array,
  to: number,
  x: Float64Array,
  at: number,
  columns: number,
  width: number,
  by: Float64Array,
  k: number,
): void {
  const f0 = by[k];
  const f1 = by[k + 1];
  const f2 = by[k + 2];
  const f3 = by[k + 3];
  const r1 = at + columns;
  const r2 = r1 + columns;
  const r3 = r2 + columns;
  for (let c = 0; c < width; c++) out[to + c] += f0 * x[at + c] + f1 * x[r1 + c] + f2 * x[r2 + c] + f3 * x[r3 + c];
}

function addOne(out: Float64Array, to: number, x: Float64Array, at: number, width: number, f: number): void {
  for (let c = 0; c < width; c++) out[to + c] += f * x[at + c];
}
