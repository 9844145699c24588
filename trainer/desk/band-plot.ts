/**
 * A forecast as a small plot in characters: the band between the bounds shaded, the median solid. For a glance in a
 * terminal; the numbers beside it are what counts.
 */

/**
 * shapes  lower, median, upper of equal length, one entry a step; non-finite steps are left blank
 * units   any, the same for all; `width` columns, `height` rows from `scale`'s low to its high
 */
export function bandPlot(
  path: { readonly lower: readonly number[]; readonly median: readonly number[]; readonly upper: readonly number[] },
  width: number,
  height: number,
  scale = rangeOf([...path.lower, ...path.median, ...path.upper]),
): string[] {
  const columns = Math.max(1, Math.min(width, path.median.length));
  const { low, high } = scale;
  const rowOf = (value: number): number =>
    Math.min(height - 1, Math.max(0, Math.floor(((value - low) / (high - low)) * height)));
  const rows = Array.from({ length: height }, () => Array.from({ length: columns }, () => ' '));
  for (let column = 0; column < columns; column++) {
    // The last column always shows the last step.
    const step =
      columns === 1 ? path.median.length - 1 : Math.round((column * (path.median.length - 1)) / (columns - 1));
    const [lower, median, upper] = [path.lower[step]!, path.median[step]!, path.upper[step]!];
    if (!Number.isFinite(median)) continue;
    for (let row = rowOf(lower); row <= rowOf(upper); row++) rows[row]![column] = '░';
    rows[rowOf(median)]![column] = partOf(((median - low) / (high - low)) * height);
  }
  return rows.reverse().map((row) => row.join(''));
}

/** Block filled from below by the part of the row that the median reaches. */
function partOf(height: number): string {
  const part = height - Math.floor(height);
  return '▁▂▃▄▅▆▇█'[Math.min(7, Math.floor(part * 8))]!;
}

/** Lowest and highest of what is to be drawn; never of one value alone. */
export function rangeOf(values: readonly number[]): { low: number; high: number } {
  const finite = values.filter(Number.isFinite);
  const low = Math.min(...finite);
  const high = Math.max(...finite);
  // A flat forecast is drawn in the middle.
  return high > low ? { low, high } : { low: low - 0.5, high: low + 0.5 };
}
