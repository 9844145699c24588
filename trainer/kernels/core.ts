/**
 * The innermost loops, as kernels.wasm has them and as scalar-*.ts has them again: the same lanes and the same order of
 * operations, so the same bits. All pointers are byte offsets into the one memory, strides and sizes are counted in
 * elements. What each does is told in assembly/; blocking, checks and scratch are the callers' (products.ts,
 * triangular.ts, orthogonal.ts, fourier.ts).
 */

/** Where a number lies: a byte offset into the memory. */
export type Pointer = number;

/** Packed panels and their products. */
export interface ProductLoops {
  pack64(
    to: Pointer,
    from: Pointer,
    rowStride: number,
    stepStride: number,
    rows: number,
    steps: number,
    width: number,
  ): void;
  pack32(
    to: Pointer,
    from: Pointer,
    rowStride: number,
    stepStride: number,
    rows: number,
    steps: number,
    width: number,
  ): void;
  panels(
    c: Pointer,
    rowStride: number,
    columnStride: number,
    a: Pointer,
    aStrip: number,
    aStep: number,
    b: Pointer,
    rows: number,
    columns: number,
    steps: number,
    skew: number,
    isTaken: number,
  ): void;
}

/** Small triangular blocks. */
export interface TriangularLoops {
  factorBlock(a: Pointer, stride: number, n: number, upper: Pointer): number;
  lowerBlock(l: Pointer, lStride: number, b: Pointer, bStride: number, n: number, m: number, tile: Pointer): void;
  upperBlock(l: Pointer, lStride: number, b: Pointer, bStride: number, n: number, m: number, tile: Pointer): void;
  rightBlock(r: Pointer, rStride: number, a: Pointer, aStride: number, n: number, rows: number, tile: Pointer): void;
}

/** Passes of the Fourier transform. */
export interface FourierLoops {
  pass4(xr: Pointer, xi: Pointer, yr: Pointer, yi: Pointer, factors: Pointer, m: number, s: number): void;
  pass2(xr: Pointer, xi: Pointer, yr: Pointer, yi: Pointer, s: number): void;
  split(x: Pointer, re: Pointer, im: Pointer, n: number): void;
  join(x: Pointer, re: Pointer, im: Pointer, factor: number, n: number): void;
  untangle(re: Pointer, im: Pointer, factors: Pointer, n: number): void;
  tangle(re: Pointer, im: Pointer, factors: Pointer, n: number): void;
}

/** Products of a matrix and a vector, which no packing would pay for. */
export interface ThinLoops {
  columnSums(
    c: Pointer,
    a: Pointer,
    stride: number,
    x: Pointer,
    m: number,
    steps: number,
    isTaken: number,
    sums: Pointer,
  ): void;
  rowDots(
    c: Pointer,
    cStride: number,
    a: Pointer,
    stride: number,
    x: Pointer,
    rows: number,
    m: number,
    isTaken: number,
  ): void;
}

/** Along one vector, or several of the same length. */
export interface VectorLoops {
  dot64(a: Pointer, b: Pointer, n: number): number;
  axpy64(y: Pointer, factor: number, x: Pointer, n: number): void;
  scale64(x: Pointer, factor: number, n: number): void;
  spectraAdd64(cr: Pointer, ci: Pointer, ar: Pointer, ai: Pointer, br: Pointer, bi: Pointer, n: number): void;
  cosines32(x: Pointer, factor: number, n: number): void;
  hadamard64(x: Pointer, n: number): void;
  hadamard32(x: Pointer, n: number): void;
}

/** Products at many distances and features carried forward, in the order of plain loops over time. */
export interface ShiftLoops {
  shiftedDots64(sums: Pointer, a: Pointer, b: Pointer, n: number, shifts: number): void;
  pairedDots64(sums: Pointer, x: Pointer, stride: number, rows: number, n: number): void;
  carryForward64(
    rows: Pointer,
    rowStride: number,
    from: Pointer,
    re: Pointer,
    im: Pointer,
    own: Pointer,
    real: number,
    n: number,
    changes: Pointer,
    steps: number,
  ): void;
  orderedProducts64(c: Pointer, a: Pointer, b: Pointer, m: number, n: number, steps: number): void;
}

/** Small symmetric eigenproblems; 0, or 1 where a value did not settle. */
export interface SymmetricLoops {
  diagonalise64(z: Pointer, d: Pointer, work: Pointer, n: number): number;
}

/** All of them. */
export type Core = ProductLoops &
  TriangularLoops &
  FourierLoops &
  VectorLoops &
  ThinLoops &
  SymmetricLoops &
  ShiftLoops;
