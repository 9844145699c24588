/**
 * A history laid on ticks: what every later step of the trainer works on.
 */

/**
 * shapes  values[c] has `ticks` entries; channel order is the site's: signals, then inputs; NaN marks a missing tick
 * units   as the site file says
 * time    tick k is labelled (firstTick + k) × tickMs, ms since 1970 UTC, and holds readings from there up to the next label
 */
export interface Series {
  readonly tickMs: number;
  readonly firstTick: number;
  readonly ticks: number;
  readonly names: readonly string[];
  readonly signalCount: number;
  readonly values: readonly Float64Array[];
  /** SHA-256 over the values and times as laid, for provenance. 32 bytes. */
  readonly digest: Uint8Array;
  /** Time that must not teach; absent where the site file excludes none. */
  readonly excluded?: Excluded;
}

/** Time of a series that must not teach: neither learned from, nor calibrated, nor judged by. */
export interface Excluded {
  /** (ticks): 1 where the whole plant is excluded. Readings of signals excluded by name are simply missing. */
  readonly isExcluded: Uint8Array;
  /** What was left out and why, in the order of the site file. */
  readonly entries: readonly ExcludedEntry[];
}

/** What one entry of the site file's `exclude` left out. */
export interface ExcludedEntry {
  readonly reason: string;
  /** null: the whole plant. */
  readonly signals: readonly string[] | null;
  /** Stretches inside the series, and the ticks they touch. */
  readonly stretches: number;
  readonly ticks: number;
  /** Start of the first stretch, end of the last, ms since 1970 UTC; null where no stretch lies in the series. */
  readonly fromMs: number | null;
  readonly toMs: number | null;
}
