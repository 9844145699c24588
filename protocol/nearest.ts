/**
 * The known name nearest to a mistyped one, by edit distance with neighbouring letters swapped counted once
 * (optimal string alignment: Damerau 1964, Levenshtein 1966).
 */

const editDistance = (a: string, b: string): number => {
  let beforeLast: number[] = [];
  let last = Array.from({ length: b.length + 1 }, (_, j) => j);
  for (let i = 1; i <= a.length; i++) {
    const row = [i];
    for (let j = 1; j <= b.length; j++) {
      const change = a[i - 1] === b[j - 1] ? 0 : 1;
      let least = Math.min(last[j]! + 1, row[j - 1]! + 1, last[j - 1]! + change);
      const isSwap = i > 1 && j > 1 && a[i - 1] === b[j - 2] && a[i - 2] === b[j - 1];
      if (isSwap) least = Math.min(least, beforeLast[j - 2]! + 1);
      row.push(least);
    }
    beforeLast = last;
    last = row;
  }
  return last[b.length]!;
};

const plain = (name: string): string => name.toLowerCase().replace(/[-_ .]/g, '');

/**
 * The nearest known name, or null when none is near: at most a third of the letters differ. Case, spaces, hyphens and
 * underscores do not count.
 */
export const nearestName = (name: string, known: readonly string[]): string | null => {
  const wanted = plain(name);
  let best: string | null = null;
  let least = Number.POSITIVE_INFINITY;
  for (const candidate of known) {
    const text = plain(candidate);
    const distance = editDistance(wanted, text);
    const allowed = Math.max(1, Math.floor(Math.max(wanted.length, text.length) / 3));
    if (distance <= allowed && distance < least) {
      best = candidate;
      least = distance;
    }
  }
  return best;
};
