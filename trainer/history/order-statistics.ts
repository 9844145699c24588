/**
 * Quantiles without sorting: quickselect (Hoare 1961, "Find") on a copy, so that a long history is looked over in time
 * that grows with its length. The answer depends on the values alone, never on their order.
 */

/** Moves the k-th smallest of a[from..to] to its place, smaller ones before it. */
function select(a: Float64Array, k: number, from: number, to: number): void {
  let left = from;
  let right = to;
  while (left < right) {
    const pivot = a[(left + right) >> 1] as number;
    let i = left;
    let j = right;
    while (i <= j) {
      while ((a[i] as number) < pivot) i++;
      while ((a[j] as number) > pivot) j--;
      if (i > j) break;
      const swap = a[i] as number;
      a[i++] = a[j] as number;
      a[j--] = swap;
    }
    if (k <= j) right = j;
    else if (k >= i) left = i;
    else return;
  }
}

/** The k-th smallest, counted from 0, of numbers without NaN; they are moved about. */
export function smallest(values: Float64Array, k: number): number {
  select(values, k, 0, values.length - 1);
  return values[k];
}

/** The numbers among the values, in a new array. */
export function present(values: Float64Array): Float64Array {
  const kept = new Float64Array(values.length);
  let count = 0;
  for (let i = 0; i < values.length; i++) {
    const value = values[i] as number;
    if (!Number.isNaN(value)) kept[count++] = value;
  }
  return kept.subarray(0, count);
}

/**
 * Values at the given shares (0..1, ascending) of the sorted values; NaN among the values is passed over.
 *
 * returns  one value a share, the one at floor(share × (n - 1)); NaN where there are none
 * cost     O(n) on average a share
 */
export function quantiles(values: Float64Array, shares: readonly number[]): number[] {
  const kept = present(values);
  const last = kept.length - 1;
  let from = 0;
  return shares.map((share) => {
    if (last < 0) return Number.NaN;
    const k = Math.floor(share * last);
    select(kept, k, from, last);
    from = k;
    return kept[k] as number;
  });
}
