/** Ticks fromTick <= n < toTick; absolute since 1970 unless said otherwise. */
export interface TickSpan {
  readonly fromTick: number;
  readonly toTick: number;
}
