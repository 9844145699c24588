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
}
