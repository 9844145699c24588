/**
 * The site file: one YAML document a site, read by the trainer and by the gateway alike.
 */

/** How a tick makes one value of the readings that fall into it. */
export type Aggregate = 'last' | 'mean' | 'min' | 'max' | 'sum' | 'increment';

/** How a reading is taken out of an MQTT payload; pointers are RFC 6901, times ISO 8601 with zone or ms since 1970. */
export type PayloadReading =
  | { readonly kind: 'number' }
  | { readonly kind: 'json' | 'msgpack'; readonly value: string; readonly time: string | null };

/** Levels that operators care about, in the signal's unit; null where none is set. */
export interface Limits {
  readonly highHigh: number | null;
  readonly high: number | null;
  readonly low: number | null;
  readonly lowLow: number | null;
}

/** A measured quantity of the site. */
export interface Signal {
  readonly name: string;
  /** MQTT topic filter of its readings; null when the site is only fitted, not run. */
  readonly topic: string | null;
  readonly payload: PayloadReading;
  /** UCUM code; '1' where dimensionless. */
  readonly unit: string;
  /** Smallest step of the sensor in `unit`; null: found in the history. */
  readonly resolution: number | null;
  /** Physically possible values in `unit`; readings outside are refused. */
  readonly range: readonly [number, number] | null;
  readonly aggregate: Aggregate;
  readonly limits: Limits;
  /** Column of wide history files, or value of the signal column of long ones; the name unless said otherwise. */
  readonly column: string;
}

/** A known cause; its plan is its values ahead of now. */
export interface Input extends Signal {
  readonly planTopic: string | null;
}

export interface Calendar {
  readonly timeOfDay: boolean;
  readonly dayOfWeek: boolean;
  /** ISO dates, local to the site's time zone. */
  readonly holidays: readonly string[];
}

/** A checked site file, every default filled in. */
export interface Site {
  readonly site: string;
  readonly equipmentClass: string;
  /** IANA time zone: for people and calendar; also of history times that carry no zone when `historyZone` is null. */
  readonly timeZone: string;
  readonly tickMs: number;
  /** Furthest forecast step, in ticks. */
  readonly horizon: number;
  readonly latenessMs: number;
  /** First level of every topic of ours. */
  readonly root: string;
  readonly residualBytesPerDay: number;
  readonly signals: readonly Signal[];
  readonly inputs: readonly Input[];
  readonly calendar: Calendar;
}
