/**
 * A history as it was found: readings by channel in the order of the files, and what was odd about them. Nothing is
 * sorted, averaged or left out here; ticks.ts does that, and the survey tells of it.
 */

/** Readings of one signal or input; `times` may be shared between channels, never write to it. */
export interface ChannelReadings {
  readonly name: string;
  /** ms since 1970 UTC, in file order. */
  readonly times: Float64Array;
  /** In the channel's unit; NaN where the field said that there is no reading. */
  readonly values: Float64Array;
}

/** How one file was understood. */
export interface FileRead {
  readonly file: string;
  readonly format:
    | 'wide CSV'
    | 'long CSV'
    | 'long NDJSON'
    | 'MQTT capture'
    | 'wide Parquet'
    | 'long Parquet'
    | 'desk archive';
  readonly separator: string | null;
  /** Rows or lines with a time, after the header. */
  readonly rows: number;
  readonly bytes: number;
  /** SHA-256 of the file as stored, hex. */
  readonly sha256: string;
  readonly timeKind: TimeKind | null;
  readonly columnsIgnored: readonly string[];
  /** Fields that said "no reading" by a word or a dash, by that word; plain empty fields under ''. */
  readonly missingMarks: Readonly<Record<string, number>>;
  /** Capture messages that matched no signal, and payloads that could not be read, by cause. */
  readonly passedOver: Readonly<Record<string, number>>;
}

/** What a file's times look like; one kind a file. */
export type TimeKind = 'ISO with zone' | 'ISO without zone' | 'epoch seconds' | 'epoch milliseconds';

/** What a clock change did to times without a zone. */
export interface ClockChange {
  /** The instant of the change. */
  readonly atMs: number;
  readonly kind: 'skipped' | 'doubled';
  /** Length of the skipped or doubled local time. */
  readonly spanMs: number;
  /** Offset in force before it, "+01:00". */
  readonly offsetBefore: string;
  /** skipped: times that cannot exist; doubled: times taken as the first pass. */
  readonly first: number;
  /** doubled: times taken as the second pass; 0 for skipped. */
  readonly second: number;
}

/**
 * shapes  channels in the site's order, signals then inputs
 */
export interface History {
  readonly channels: readonly ChannelReadings[];
  readonly signalCount: number;
  readonly files: readonly FileRead[];
  /** Zone used for times that carry none; null when none did. */
  readonly zone: string | null;
  readonly clockChanges: readonly ClockChange[];
}
