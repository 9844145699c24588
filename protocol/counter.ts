/**
 * What a counter counted from one reading to the next. It falls for two reasons: it reached its end and began again, or
 * it was reset. Common practice tells them apart by what a wrap would imply: more than half of the range in one step is
 * not believed.
 */

/**
 * The increase; NaN where none can be told: nothing is known of before, or the counter was set to a value that is neither.
 *
 * wrap  range of the counter in the unit of its readings; null: no end is known, so every fall is a reset to zero
 */
export const counterIncrease = (before: number, value: number, wrap: number | null): number => {
  if (Number.isNaN(before)) return Number.NaN;
  if (value >= before) return value - before;
  if (wrap === null) return value >= 0 ? value : Number.NaN;
  const wrapped = value - before + wrap;
  if (wrapped <= wrap / 2) return wrapped;
  return value >= 0 && value <= wrap / 2 ? value : Number.NaN;
};
