/** States from past features, which everything that learns, condenses and judges does alike. */

/** x = W φ; x (order), W (order × φ). */
export function mapStates({ stateMap }: { readonly stateMap: Float64Array }, phi: Float64Array, x: Float64Array): void {
  for (let k = 0; k < x.length; k++) {
    const row = k * phi.length;
    let s0 = 0;
    let s1 = 0;
    let j = 0;
    for (; j + 1 < phi.length; j += 2) {
      s0 += stateMap[row + j] * phi[j];
      s1 += stateMap[row + j + 1] * phi[j + 1];
    }
    x[k] = j < phi.length ? s0 + s1 + stateMap[row + j] * phi[j] : s0 + s1;
  }
}
