/**
 * What the gateway tells the browser beside the published messages, as it stands in JSON. Types alone: both sides of the page
 * are written against them.
 */
import type { ForecastMessage, HealthMessage, Limits, Quality } from '@stillwell/protocol';

/** A signal or an input, as the site file and the bundle have it. */
export interface ChannelFacts {
  readonly name: string;
  readonly unit: string;
  /** Decimals that its readings have; null: not known. */
  readonly decimals: number | null;
  readonly limits: Limits;
}

/** What holds as long as the gateway runs with this bundle. */
export interface SiteFacts {
  readonly site: string;
  readonly class: string;
  readonly gateway: string;
  readonly zone: string;
  readonly tick_ms: number;
  readonly horizon: number;
  /** `wall` or `readings`: by what ticks close. */
  readonly clock: string;
  readonly advisory: string;
  readonly version: string;
  readonly signals: readonly ChannelFacts[];
  readonly inputs: readonly ChannelFacts[];
}

/** How a signal is now. */
export interface SignalFacts {
  readonly signal: string;
  readonly quality: Quality | null;
  readonly reason: string | null;
  /** Time of its newest reading, ms since 1970; null: none yet. */
  readonly last_ms: number | null;
}

/** A warning that is open: a limit will probably be crossed. Times are ms since 1970; null: not within the horizon. */
export interface WarningFacts {
  readonly signal: string;
  readonly limit: string;
  readonly value: number;
  readonly since_ms: number;
  readonly probability: number;
  readonly earliest_ms: number | null;
  readonly likely_ms: number | null;
  readonly latest_ms: number | null;
  /** First reading past the limit since it opened; null: none. */
  readonly crossed_ms: number | null;
}

/** How the gateway is now, beside its health message. */
export interface GatewayFacts {
  readonly bundle: {
    readonly digest: string;
    readonly sequence: number;
    readonly kind: string;
    readonly made_ms: number;
    readonly bytes: number;
  } | null;
  readonly link: {
    readonly connected: boolean;
    /** Seconds of the present state, connected or not. */
    readonly for_s: number;
    /** `5` or `3.1.1`; null before the first connection. */
    readonly protocol: string | null;
    readonly reconnects: number;
    /** Why it was lost or refused last; null: never. */
    readonly reason: string | null;
  };
  readonly spool: {
    readonly waiting: number;
    readonly bytes: number;
    readonly most_bytes: number;
    /** Since the first tick of the oldest segment; null: none waits, or it cannot be read. */
    readonly oldest_s: number | null;
  };
  /** Why nothing is kept on disk; null: it is. */
  readonly disk_fault: string | null;
  /** False: the machine's clock was never set, the readings' times are used. */
  readonly clock_set: boolean;
  readonly up_s: number;
  readonly memory_bytes: number;
  /** Largest of the last minute. */
  readonly loop_delay_s: number;
  readonly signals: readonly SignalFacts[];
  readonly warnings: readonly WarningFacts[];
}

/** What has come: by channel, signals first, null where nothing did. */
export interface PastReadings {
  /** Ticks the points stand for, rising. */
  readonly ticks: readonly number[];
  readonly values: readonly (readonly (number | null)[])[];
}

/** An earlier forecast: steps kept, and by signal what was said of them. */
export interface SaidThen {
  readonly tick: number;
  readonly sequence: number;
  readonly steps: readonly number[];
  readonly median: readonly (readonly number[])[];
  readonly lower: readonly (readonly number[])[];
  readonly upper: readonly (readonly number[])[];
}

/** How the gateway is: event `pulse`. */
export interface Pulse {
  /** Now, by the clock that ticks go by, ms since 1970; null: not known yet. */
  readonly at: number | null;
  readonly health: HealthMessage;
  readonly facts: GatewayFacts;
}

/** A tick's news: event `tick`. */
export interface News extends Pulse {
  /** By signal; none before the first tick with a bundle. */
  readonly forecasts: readonly ForecastMessage[];
  /** Readings of the ticks since the last news, signals first. */
  readonly came: PastReadings;
  /** Earlier forecasts, oldest first. */
  readonly said: readonly SaidThen[];
}

/** Everything: event `all`. */
export interface Snapshot extends News {
  /** Of the page's own text: another one means that a newer program runs here. */
  readonly page: string;
  readonly site: SiteFacts;
}
