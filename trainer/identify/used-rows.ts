/**
 * Maps of many features of which few take part: their products are worked out on those alone. Rows of zeros add nothing to
 * any sum, so what comes out is the same to the bit.
 */

/**
 * Rows of a map that hold anything but zeros in the columns from..to-1.
 *
 * shapes  map (rows × width); result ascending
 * units   none
 * throws  nothing
 * source  none
 * cost    O(rows (to - from)) at most
 */
export function usedRows(map: Float64Array, rows: number, width: number, from: number, to: number): Int32Array {
  const used: number[] = [];
  for (let f = 0; f < rows; f++) {
    let k = from;
    while (k < to && map[f * width + k] === 0) k++;
    if (k < to) used.push(f);
  }
  return Int32Array.from(used);
}

/**
 * Some rows of a map, the columns from..to-1 of them.
 *
 * shapes  result (rows × (to - from))
 * units   as the map
 * throws  nothing
 * source  none
 * cost    the size of the result
 */
export function pickedRows(map: Float64Array, width: number, rows: Int32Array, from: number, to: number): Float64Array {
  const out = new Float64Array(rows.length * (to - from));
  rows.forEach((f, a) => {
    out.set(map.subarray(f * width + from, f * width + to), a * (to - from));
  });
  return out;
}

/**
 * A principal submatrix.
 *
 * shapes  matrix (p × p); result (chosen × chosen)
 * units   as the matrix
 * throws  nothing
 * source  none
 * cost    the size of the result
 */
export function pickedSquare(matrix: Float64Array, p: number, chosen: Int32Array): Float64Array {
  const n = chosen.length;
  const out = new Float64Array(n * n);
  for (let a = 0; a < n; a++) {
    const row = chosen[a] * p;
    for (let b = 0; b < n; b++) out[a * n + b] = matrix[row + chosen[b]];
  }
  return out;
}
