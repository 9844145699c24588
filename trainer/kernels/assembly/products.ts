/**
 * Packed matrix products: panels are copied into strips of four, then 4 × 4 tiles are summed in eight registers of two
 * lanes (Goto & van de Geijn 2008, "Anatomy of high-performance matrix multiplication"). Blocking over memory is the
 * caller's (trainer/kernels/products.ts). Pointers are byte offsets, strides and sizes are counted in elements.
 */

/**
 * Copies a panel of float64 into strips of four: strip s holds, step by step, rows 4s to 4s+3. Missing rows are zero.
 * Element (i, t) is read at source + 8 (i rowStride + t stepStride).
 */
export function pack64(to: usize, source: usize, rowStride: i32, stepStride: i32, rows: i32, steps: i32): void {
  const row = (<usize>rowStride) << 3;
  const step = (<usize>stepStride) << 3;
  for (let i = 0; i < rows; i += 4) {
    let from = source + <usize>i * row;
    if (i + 4 <= rows) {
      if (rowStride == 1) {
        for (let t = 0; t < steps; t++, from += step, to += 32) {
          v128.store(to, v128.load(from));
          v128.store(to, v128.load(from, 16), 16);
        }
      } else {
        const second = from + row;
        const third = second + row;
        const fourth = third + row;
        for (let t: usize = 0, at: usize = 0; t < <usize>steps; t++, at += step, to += 32) {
          f64.store(to, f64.load(from + at));
          f64.store(to, f64.load(second + at), 8);
          f64.store(to, f64.load(third + at), 16);
          f64.store(to, f64.load(fourth + at), 24);
        }
      }
    } else {
      for (let t = 0; t < steps; t++, from += step, to += 32) {
        f64.store(to, f64.load(from));
        f64.store(to, i + 1 < rows ? f64.load(from + row) : 0, 8);
        f64.store(to, i + 2 < rows ? f64.load(from + 2 * row) : 0, 16);
        f64.store(to, 0, 24);
      }
    }
  }
}

/** The same from float32, widened on the way. */
export function pack32(to: usize, source: usize, rowStride: i32, stepStride: i32, rows: i32, steps: i32): void {
  const row = (<usize>rowStride) << 2;
  const step = (<usize>stepStride) << 2;
  for (let i = 0; i < rows; i += 4) {
    let from = source + <usize>i * row;
    if (i + 4 <= rows && rowStride == 1) {
      for (let t = 0; t < steps; t++, from += step, to += 32) {
        v128.store(to, f64x2.promote_low_f32x4(v128.load64_zero(from)));
        v128.store(to, f64x2.promote_low_f32x4(v128.load64_zero(from, 8)), 16);
      }
    } else {
      for (let t = 0; t < steps; t++, from += step, to += 32) {
        f64.store(to, <f64>f32.load(from));
        f64.store(to, i + 1 < rows ? <f64>f32.load(from + row) : 0, 8);
        f64.store(to, i + 2 < rows ? <f64>f32.load(from + 2 * row) : 0, 16);
        f64.store(to, i + 3 < rows ? <f64>f32.load(from + 3 * row) : 0, 24);
      }
    }
  }
}

/**
 * C += A B, or C -= A B, from packed panels: a holds `rows` rows, b `columns` columns, of `steps` steps each. Tiles wholly
 * above the diagonal i + skew = j are left out. Each element sums its products in order, then adds the sum once.
 */
export function panels(
  c: usize,
  stride: i32,
  a: usize,
  b: usize,
  rows: i32,
  columns: i32,
  steps: i32,
  skew: i32,
  isTaken: i32,
): void {
  const strip = (<usize>steps) << 5;
  for (let j = 0; j < columns; j += 4) {
    const right = b + <usize>(j >> 2) * strip;
    for (let i = 0; i < rows; i += 4) {
      if (i + skew + 3 < j) continue;
      const to = c + (<usize>(i * stride + j) << 3);
      tile(to, stride, a + <usize>(i >> 2) * strip, right, rows - i, columns - j, steps, isTaken);
    }
  }
}

/** One tile of four rows and four columns, or what of it lies inside. */
function tile(
  to: usize,
  stride: i32,
  a: usize,
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
  let c20 = f64x2.splat(0);
  let c21 = f64x2.splat(0);
  let c30 = f64x2.splat(0);
  let c31 = f64x2.splat(0);
  for (let t = 0; t < steps; t++, a += 32, b += 32) {
    const b0 = v128.load(b);
    const b1 = v128.load(b, 16);
    const a0 = v128.load_splat<f64>(a);
    c00 = f64x2.add(c00, f64x2.mul(a0, b0));
    c01 = f64x2.add(c01, f64x2.mul(a0, b1));
    const a1 = v128.load_splat<f64>(a, 8);
    c10 = f64x2.add(c10, f64x2.mul(a1, b0));
    c11 = f64x2.add(c11, f64x2.mul(a1, b1));
    const a2 = v128.load_splat<f64>(a, 16);
    c20 = f64x2.add(c20, f64x2.mul(a2, b0));
    c21 = f64x2.add(c21, f64x2.mul(a2, b1));
    const a3 = v128.load_splat<f64>(a, 24);
    c30 = f64x2.add(c30, f64x2.mul(a3, b0));
    c31 = f64x2.add(c31, f64x2.mul(a3, b1));
  }
  if (isTaken) {
    c00 = f64x2.neg(c00);
    c01 = f64x2.neg(c01);
    c10 = f64x2.neg(c10);
    c11 = f64x2.neg(c11);
    c20 = f64x2.neg(c20);
    c21 = f64x2.neg(c21);
    c30 = f64x2.neg(c30);
    c31 = f64x2.neg(c31);
  }
  const next = (<usize>stride) << 3;
  addRow(to, c00, c01, columns);
  if (rows > 1) addRow(to + next, c10, c11, columns);
  if (rows > 2) addRow(to + 2 * next, c20, c21, columns);
  if (rows > 3) addRow(to + 3 * next, c30, c31, columns);
}

/** Adds up to four sums to a row of the result. */
function addRow(to: usize, low: v128, high: v128, columns: i32): void {
  if (columns > 3) {
    v128.store(to, f64x2.add(v128.load(to), low));
    v128.store(to, f64x2.add(v128.load(to, 16), high), 16);
    return;
  }
  f64.store(to, f64.load(to) + f64x2.extract_lane(low, 0));
  if (columns > 1) f64.store(to, f64.load(to, 8) + f64x2.extract_lane(low, 1), 8);
  if (columns > 2) f64.store(to, f64.load(to, 16) + f64x2.extract_lane(high, 0), 16);
}
