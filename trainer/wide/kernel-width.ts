/** How wide a Gaussian kernel should be where nobody says: as wide as the vectors are apart. */
import { openRandom } from './random.ts';

/** Couples of vectors that are measured. */
const COUPLES = 2000;

/**
 * The median distance between vectors of a sample.
 *
 * shapes  rows (count × length), row-major; couples drawn with the seed, never of a row with itself
 * units   of the rows
 * throws  RangeError for fewer than two rows
 * source  the median heuristic, common practice (Garreau, Jitkrittum and Kanagawa 2017 ask when it is good)
 * cost    2000 distances at most
 */
export function medianWidth(rows: Float32Array, count: number, seed: number): number {
  if (!(count >= 2)) throw new RangeError(`count: expected 2 rows or more, got ${count}`);
  const length = rows.length / count;
  const random = openRandom(seed, 2);
  const couples = Math.min(COUPLES, (count * (count - 1)) / 2);
  const distances = Float64Array.from({ length: couples }, () => {
    const one = random.below(count);
    const other = (one + 1 + random.below(count - 1)) % count;
    let square = 0;
    for (let k = 0; k < length; k++) square += (rows[one * length + k] - rows[other * length + k]) ** 2;
    return Math.sqrt(square);
  }).sort();
  const median = distances[Math.floor(couples / 2)];
  // Where more than half of the rows are alike, the mean; where all are, any width does.
  return median > 0 ? median : distances.reduce((sum, value) => sum + value, 0) / couples || 1;
}
