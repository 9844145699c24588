/**
 * Packed matrix products: panels are copied into strips, two rows wide on the left and eight on the right, then tiles of
 * 2 × 8 are summed in eight registers of two lanes (Goto & van de Geijn 2008, "Anatomy of high-performance matrix
 * multiplication"). Eight sums, four loads and two splats are what the engine's fifteen registers hold without spilling:
 * 97 % of the peak in the loop, where 4 × 4 reaches 83 % and any unrolled form 60 %. Blocking over memory is the caller's
 * (trainer/kernels/products.ts). Pointers are byte offsets, strides and sizes are counted in elements.
 */

/**
 * Copies a panel of float64 into strips of `width` rows (2 or 8): strip s holds, step by step, its rows side by side. Missing
 * rows are zero. Element (i, t) is read at from + 8 (i rowStride + t stepStride).
 */
export function pack64(
  to: usize,
  from: usize,
  rowStride: i32,
  stepStride: i32,
  rows: i32,
  steps: i32,
  width: i32,
): void {
  const row = (<usize>rowStride) << 3;
  const step = (<usize>stepStride) << 3;
  const wide = (<usize>width) << 3;
  for (let i = 0; i < rows; i += width, from += row * width, to += wide * steps) {
    const whole = i + width <= rows;
    if (whole && rowStride == 1) {
      if (width == 2) copyPairs(to, from, step, steps);
      else copyEights(to, from, step, steps);
    } else if (whole && stepStride == 1) {
      for (let r: usize = 0; r < <usize>width; r += 2) turnPairs(to + (r << 3), from + r * row, row, steps, wide);
    } else {
      const inside = whole ? width : rows - i;
      for (let t: usize = 0; t < <usize>steps; t++) {
        const out = to + t * wide;
        let at = from + step * t;
        for (let r = 0; r < inside; r++, at += row) f64.store(out + (<usize>r << 3), f64.load(at));
        for (let r = inside; r < width; r++) f64.store(out + (<usize>r << 3), 0);
      }
    }
  }
}

/** The same from float32, widened on the way. */
export function pack32(
  to: usize,
  from: usize,
  rowStride: i32,
  stepStride: i32,
  rows: i32,
  steps: i32,
  width: i32,
): void {
  const row = (<usize>rowStride) << 2;
  const step = (<usize>stepStride) << 2;
  const wide = (<usize>width) << 3;
  for (let i = 0; i < rows; i += width, from += row * width, to += wide * steps) {
    const whole = i + width <= rows;
    const inside = whole ? width : rows - i;
    for (let t: usize = 0; t < <usize>steps; t++) {
      const out = to + t * wide;
      const at = from + step * t;
      if (whole && rowStride == 1) {
        v128.store(out, f64x2.promote_low_f32x4(v128.load64_zero(at)));
        if (width == 2) continue;
        v128.store(out, f64x2.promote_low_f32x4(v128.load64_zero(at, 8)), 16);
        v128.store(out, f64x2.promote_low_f32x4(v128.load64_zero(at, 16)), 32);
        v128.store(out, f64x2.promote_low_f32x4(v128.load64_zero(at, 24)), 48);
      } else {
        for (let r = 0; r < width; r++) {
          f64.store(out + (<usize>r << 3), r < inside ? <f64>f32.load(at + row * r) : 0);
        }
      }
    }
  }
}

function copyPairs(to: usize, from: usize, step: usize, steps: i32): void {
  for (let t = 0; t < steps; t++, from += step, to += 16) v128.store(to, v128.load(from));
}

function copyEights(to: usize, from: usize, step: usize, steps: i32): void {
  for (let t = 0; t < steps; t++, from += step, to += 64) {
    v128.store(to, v128.load(from));
    v128.store(to, v128.load(from, 16), 16);
    v128.store(to, v128.load(from, 32), 32);
    v128.store(to, v128.load(from, 48), 48);
  }
}

/** Two rows whose steps lie side by side become steps whose two rows lie side by side. */
function turnPairs(to: usize, from: usize, row: usize, steps: i32, wide: usize): void {
  let t = 0;
  for (; t + 1 < steps; t += 2, from += 16, to += 2 * wide) {
    const a = v128.load(from);
    const b = v128.load(from + row);
    v128.store(to, v128.shuffle<f64>(a, b, 0, 2));
    v128.store(to + wide, v128.shuffle<f64>(a, b, 1, 3));
  }
  if (t == steps) return;
  f64.store(to, f64.load(from));
  f64.store(to, f64.load(from + row), 8);
}

/**
 * C += A B, or C -= A B: b is a packed panel of `columns` columns, a one of `rows` rows, or the matrix itself where pairs of
 * rows lie side by side: element (i, t) of A lies at a + 8 (i / 2 aStrip + i % 2 + t aStep), (i, j) of C at
 * c + 8 (i rowStride + j columnStride). Tiles wholly above the diagonal i + skew = j are left out. Each element
 * sums its products in order, then adds the sum once.
 */
export function panels(
  c: usize,
  rowStride: i32,
  columnStride: i32,
  a: usize,
  aStrip: i32,
  aStep: i32,
  b: usize,
  rows: i32,
  columns: i32,
  steps: i32,
  skew: i32,
  isTaken: i32,
): void {
  const left = (<usize>aStrip) << 3;
  const next = (<usize>aStep) << 3;
  const right = (<usize>steps) << 6;
  for (let j = 0; j < columns; j += 8, b += right) {
    let strip = a;
    for (let i = 0; i < rows; i += 2, strip += left) {
      if (i + skew + 1 < j) continue;
      const to = c + (<usize>(i * rowStride + j * columnStride) << 3);
      if (columns - j < 5) narrowTile(to, rowStride, columnStride, strip, next, b, rows - i, columns - j, steps, isTaken);
      else tile(to, rowStride, columnStride, strip, next, b, rows - i, columns - j, steps, isTaken);
    }
  }
}

/** One tile of two rows and eight columns, or what of it lies inside. */
function tile(
  to: usize,
  rowStride: i32,
  columnStride: i32,
  a: usize,
  next: usize,
  b: usize,
  rows: i32,
  columns: i32,
  steps: i32,
  isTaken: i32,
): void {
  let c00 = f64x2.splat(0);
  let c01 = f64x2.splat(0);
  let c02 = f64x2.splat(0);
  let c03 = f64x2.splat(0);
  let c10 = f64x2.splat(0);
  let c11 = f64x2.splat(0);
  let c12 = f64x2.splat(0);
  let c13 = f64x2.splat(0);
  for (let t = 0; t < steps; t++, a += next, b += 64) {
    const b0 = v128.load(b);
    const b1 = v128.load(b, 16);
    const b2 = v128.load(b, 32);
    const b3 = v128.load(b, 48);
    const a0 = v128.load_splat<f64>(a);
    c00 = f64x2.add(c00, f64x2.mul(a0, b0));
    c01 = f64x2.add(c01, f64x2.mul(a0, b1));
    c02 = f64x2.add(c02, f64x2.mul(a0, b2));
    c03 = f64x2.add(c03, f64x2.mul(a0, b3));
    const a1 = v128.load_splat<f64>(a, 8);
    c10 = f64x2.add(c10, f64x2.mul(a1, b0));
    c11 = f64x2.add(c11, f64x2.mul(a1, b1));
    c12 = f64x2.add(c12, f64x2.mul(a1, b2));
    c13 = f64x2.add(c13, f64x2.mul(a1, b3));
  }
  if (isTaken) {
    c00 = f64x2.neg(c00);
    c01 = f64x2.neg(c01);
    c02 = f64x2.neg(c02);
    c03 = f64x2.neg(c03);
    c10 = f64x2.neg(c10);
    c11 = f64x2.neg(c11);
    c12 = f64x2.neg(c12);
    c13 = f64x2.neg(c13);
  }
  addRow(to, columnStride, c00, c01, c02, c03, columns);
  if (rows > 1) addRow(to + ((<usize>rowStride) << 3), columnStride, c10, c11, c12, c13, columns);
}

/** The left half of a tile, for a strip with no more than four columns. */
function narrowTile(
  to: usize,
  rowStride: i32,
  columnStride: i32,
  a: usize,
  next: usize,
  b: usize,
  rows: i32,
  columns: i32,
  steps: i32,
  isTaken: i32,
): void {
  let c00 = f64x2.splat(0);
  let c01 = f64x2.splat(0);
  let c10 = f64x2.splat(0);
  let c11 = f64x2.splat(0);
  for (let t = 0; t < steps; t++, a += next, b += 64) {
    const b0 = v128.load(b);
    const b1 = v128.load(b, 16);
    const a0 = v128.load_splat<f64>(a);
    c00 = f64x2.add(c00, f64x2.mul(a0, b0));
    c01 = f64x2.add(c01, f64x2.mul(a0, b1));
    const a1 = v128.load_splat<f64>(a, 8);
    c10 = f64x2.add(c10, f64x2.mul(a1, b0));
    c11 = f64x2.add(c11, f64x2.mul(a1, b1));
  }
  if (isTaken) {
    c00 = f64x2.neg(c00);
    c01 = f64x2.neg(c01);
    c10 = f64x2.neg(c10);
    c11 = f64x2.neg(c11);
  }
  addRow(to, columnStride, c00, c01, c01, c01, columns);
  if (rows > 1) addRow(to + ((<usize>rowStride) << 3), columnStride, c10, c11, c11, c11, columns);
}

/** Adds up to eight sums to a row of the result. */
function addRow(to: usize, columnStride: i32, a: v128, b: v128, c: v128, d: v128, columns: i32): void {
  if (columns > 7 && columnStride == 1) {
    v128.store(to, f64x2.add(v128.load(to), a));
    v128.store(to, f64x2.add(v128.load(to, 16), b), 16);
    v128.store(to, f64x2.add(v128.load(to, 32), c), 32);
    v128.store(to, f64x2.add(v128.load(to, 48), d), 48);
    return;
  }
  const next = (<usize>columnStride) << 3;
  addPair(to, next, a, columns);
  if (columns > 2) addPair(to + 2 * next, next, b, columns - 2);
  if (columns > 4) addPair(to + 4 * next, next, c, columns - 4);
  if (columns > 6) addPair(to + 6 * next, next, d, columns - 6);
}

function addPair(to: usize, next: usize, sums: v128, columns: i32): void {
  f64.store(to, f64.load(to) + f64x2.extract_lane(sums, 0));
  if (columns > 1) f64.store(to + next, f64.load(to + next) + f64x2.extract_lane(sums, 1));
}
