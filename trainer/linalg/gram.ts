/**
 * Adds rows' products to a Gram matrix, a block of rows at a time: four rows folded in together cost hardly more than one,
 * since the matrix is read and written once for them. Not for matrices of more than a few hundred columns: no tiling.
 */

/**
 * Adds Φ'Φ of a block of rows to the lower triangle of a matrix.
 *
 * shapes  gram (D × D), block (rows up to a multiple of four × D); rows beyond `rows` are overwritten with zeros
 * units   as the block's, squared
 * throws  nothing
 * source  definition
 * cost    O(rows D² / 2)
 */
export function addLowerGram(gram: Float64Array, block: Float64Array, rows: number, D: number): void {
  block.fill(0, rows * D);
  for (let k = 0; k < rows; k += 4) {
    const r0 = k * D;
    let a = 0;
    for (; a + 1 < D; a += 2) addTwoRows(gram, block, r0, D, a);
    if (a < D) addRow(gram, block, r0, D, a);
  }
}

/** Rows a and a + 1 of the triangle: what is read of the block serves both. */
function addTwoRows(gram: Float64Array, block: Float64Array, r0: number, D: number, a: number): void {
  const r1 = r0 + D;
  const r2 = r1 + D;
  const r3 = r2 + D;
  const f0 = block[r0 + a];
  const f1 = block[r1 + a];
  const f2 = block[r2 + a];
  const f3 = block[r3 + a];
  const g0 = block[r0 + a + 1];
  const g1 = block[r1 + a + 1];
  const g2 = block[r2 + a + 1];
  const g3 = block[r3 + a + 1];
  const row = a * D;
  const next = row + D;
  for (let b = 0; b <= a; b++) {
    const b0 = block[r0 + b];
    const b1 = block[r1 + b];
    const b2 = block[r2 + b];
    const b3 = block[r3 + b];
    gram[row + b] += f0 * b0 + f1 * b1 + f2 * b2 + f3 * b3;
    gram[next + b] += g0 * b0 + g1 * b1 + g2 * b2 + g3 * b3;
  }
  gram[next + a + 1] += g0 * g0 + g1 * g1 + g2 * g2 + g3 * g3;
}

/** The last row of an odd number. */
function addRow(gram: Float64Array, block: Float64Array, r0: number, D: number, a: number): void {
  const r1 = r0 + D;
  const r2 = r1 + D;
  const r3 = r2 + D;
  const f0 = block[r0 + a];
  const f1 = block[r1 + a];
  const f2 = block[r2 + a];
  const f3 = block[r3 + a];
  for (let b = 0; b <= a; b++) {
    gram[a * D + b] += f0 * block[r0 + b] + f1 * block[r1 + b] + f2 * block[r2 + b] + f3 * block[r3 + b];
  }
}
