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
    for (let a = 0; a < D; a++) {
      const f0 = block[r0 + a];
      const f1 = block[r0 + D + a];
      const f2 = block[r0 + 2 * D + a];
      const f3 = block[r0 + 3 * D + a];
      const row = a * D;
      for (let b = 0; b <= a; b++) {
        gram[row + b] +=
          f0 * block[r0 + b] + f1 * block[r0 + D + b] + f2 * block[r0 + 2 * D + b] + f3 * block[r0 + 3 * D + b];
      }
    }
  }
}
