/**
 * Largest sizes accepted, each with its reason. A limit is checked before the work it bounds.
 */

/** Hard cap of a sealed bundle: one MQTT message that any broker and a 256 MiB gateway take without noticing. */
export const MAX_BUNDLE_BYTES = 64 * 1024;

/** What a fit aims at unless told otherwise: eight signals fit with room for the judge's table. */
export const TARGET_BUNDLE_BYTES = 24 * 1024;

/** A reading's payload: whole telemetry frames of a PLC fit; anything larger is not a reading. */
export const MAX_PAYLOAD_BYTES = 64 * 1024;

/** One message of ours other than a bundle or a segment: 256 signals × 3 × 1024 steps do not fit, a real site does. */
export const MAX_MESSAGE_BYTES = 1024 * 1024;

/** A site file: 256 signals with every key and a comment each stay under a fifth of it. */
export const MAX_SITE_FILE_BYTES = 1024 * 1024;

/** A key file: two hex keys and their names, with room. */
export const MAX_KEY_FILE_BYTES = 4096;

/** Signals and inputs together: the work of a tick grows with their square once the bottleneck is dense. */
export const MAX_CHANNELS = 256;

/** Signals of one site; inputs share MAX_CHANNELS with them. */
export const MAX_SIGNALS = 256;

/** Furthest step: 720 (a month of hours) is the longest horizon commonly tabulated. */
export const MAX_HORIZON = 1024;

/** Longest ring lag in ticks: two weeks of minutes, 160 KiB a channel. */
export const MAX_LAG_TICKS = 20_160;

/** Ticks of a round: its memory, 8 bytes a tick and signal, travels with every keyed segment. */
export const MAX_ROUND_TICKS = 1024;

/** Shortest tick: below it the tick's own work no longer hides between messages. */
export const MIN_TICK_MS = 100;

/** Longest tick: one day. */
export const MAX_TICK_MS = 86_400_000;

/** Nesting of a MessagePack document: the deepest of ours is 4. */
export const MAX_DEPTH = 8;

/** Values in a MessagePack document, keys counted: a bundle of 256 channels has about 13,000. */
export const MAX_ITEMS = 32_768;

/** UTF-8 bytes in a name of a site, signal or gateway: it is a topic level and part of a file name. */
export const MAX_NAME_BYTES = 64;

/** UTF-8 bytes of an MQTT topic: OASIS MQTT 5.0 section 4.7.3 [MQTT-4.7.3-3]. */
export const MAX_TOPIC_BYTES = 65_535;

/** Receipts in one message: a window of segments is a few; a catch-up after an outage is split. */
export const MAX_RECEIPT_SEGMENTS = 1024;

/** An asker's own mark in a question, said again in the answer; a UUID as text takes 36. */
export const MAX_ID_BYTES = 64;

/** Values in one plan: the longest horizon at four values a tick. */
export const MAX_PLAN_VALUES = 4096;

/** From a plan's start to its end, or one horizon where that is longer: a year's schedule. */
export const MAX_PLAN_SPAN_MS = 366 * 86_400_000;

/** From now to a plan's start, or one horizon where that is longer: beyond it the year or the unit is mistaken. */
export const MAX_PLAN_AHEAD_MS = 31 * 86_400_000;
