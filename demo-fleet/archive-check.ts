/**
 * Holds the desk's archive against what the sensors said, reading by reading: equal to the last bit, nothing missing,
 * nothing invented.
 */

/** What the comparison found, over the ticks that the archive covers. */
export interface ArchiveComparison {
  /** Ticks compared, from the first of play to the archive's last. */
  readonly ticks: number;
  /** Readings said in those ticks. */
  readonly readings: number;
  /** Said, and not in the archive. */
  readonly missing: number;
  /** In the archive with another value. */
  readonly different: number;
  /** In the archive, and never said. */
  readonly invented: number;
  /** The first difference, for the log; null when there is none. */
  readonly example: string | null;
}

/** A site's archive as far as the comparison needs it. */
export interface ArchivedReadings {
  readonly ticks: ArrayLike<number>;
  readonly channels: readonly { readonly name: string; readonly values: ArrayLike<number> }[];
}

/**
 * Compares; `said[k]` holds the readings of tick `firstTick + k` in the order of `names`. `settledTick` is the last tick
 * whose readings, late ones included, had all been sent when the archive was read; what lies after it is left out.
 */
export function compareArchive(
  archive: ArchivedReadings,
  names: readonly string[],
  said: readonly Float64Array[],
  firstTick: number,
  settledTick: number,
): ArchiveComparison {
  const columns = names.map((name) => archive.channels.find((channel) => channel.name === name)?.values ?? []);
  const rowOf = new Map<number, number>();
  for (let row = 0; row < archive.ticks.length; row++) rowOf.set(archive.ticks[row], row);
  const last = Math.min(
    settledTick,
    archive.ticks[archive.ticks.length - 1] ?? firstTick - 1,
    firstTick + said.length - 1,
  );
  const found = { ticks: 0, readings: 0, missing: 0, different: 0, invented: 0, example: null as string | null };
  const odd = (
    kind: 'missing' | 'different' | 'invented',
    tick: number,
    name: string,
    was: number,
    is: number,
  ): void => {
    found[kind]++;
    found.example ??= `${name} at tick ${tick - firstTick} of play: said ${was}, archived ${is}`;
  };
  for (let tick = firstTick; tick <= last; tick++) {
    found.ticks++;
    const row = rowOf.get(tick);
    for (let c = 0; c < names.length; c++) {
      const was = said[tick - firstTick][c];
      const is = row === undefined ? Number.NaN : (columns[c][row] ?? Number.NaN);
      if (!Number.isNaN(was)) found.readings++;
      if (Object.is(was, is) || (was === 0 && is === 0)) continue;
      odd(Number.isNaN(is) ? 'missing' : Number.isNaN(was) ? 'invented' : 'different', tick, names[c], was, is);
    }
  }
  return found;
}
