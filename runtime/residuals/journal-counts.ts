/** What a gateway's journal counts, over all the streams of a run. */

/** Counted since the start. */
export interface JournalCounts {
  readonly closed: number;
  readonly shedSegments: number;
  readonly shedBytes: number;
  readonly shedTicks: number;
  /** Segments lost since the disk took nothing for too long. */
  readonly lost: number;
}

/** Before the first segment. */
export const NOTHING_COUNTED: JournalCounts = { closed: 0, shedSegments: 0, shedBytes: 0, shedTicks: 0, lost: 0 };
