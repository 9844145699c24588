/** Where a history counts as long, and how it is then cut: the newest part in memory, what is older in chunks past it. */

/** A history of more ticks is long. */
export const LONG_FROM = 96_000;
/** Ticks of a long history that are kept in memory, the newest: its other kinds, bounds and judgement come from them. */
export const RECENT_TICKS = 64_000;
/** Ticks of a chunk of what is older; chunks begin at multiples of it from the first tick, so that bits never depend on blocks read. */
export const CHUNK_TICKS = 16_384;
