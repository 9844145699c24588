/** How far eigenvalues and vectors are from what they must be. */

/** Largest entry of |Z' diag(d) Z − A| and of |Z Z' − I|. */
export function eigenErrors(z: Float64Array, d: Float64Array, a: Float64Array, n: number): [number, number] {
  let made = 0;
  let unit = 0;
  for (let i = 0; i < n; i++) {
    for (let j = 0; j < n; j++) {
      let sum = -a[i * n + j];
      let product = i === j ? -1 : 0;
      for (let k = 0; k < n; k++) {
        sum += z[k * n + i] * d[k] * z[k * n + j];
        product += z[i * n + k] * z[j * n + k];
      }
      made = Math.max(made, Math.abs(sum));
      unit = Math.max(unit, Math.abs(product));
    }
  }
  return [made, unit];
}
