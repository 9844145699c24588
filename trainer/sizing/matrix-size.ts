/** Matrices that are never formed, and what they would have taken. */

/** Bytes of a number. */
const NUMBER_BYTES = 8;

/** A square matrix of float64. */
export interface Matrix {
  readonly rows: number;
  readonly entries: number;
  readonly bytes: number;
}

function square(rows: number): Matrix {
  return { rows, entries: rows * rows, bytes: NUMBER_BYTES * rows * rows };
}

/** The covariance of so many features: features × features, however long the history. */
export function covarianceOf(features: number): Matrix {
  return square(features);
}

/** The Gram matrix of so many windows: windows × windows, however wide they are. */
export function gramOf(windows: number): Matrix {
  return square(windows);
}
