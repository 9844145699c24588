/** From messages to readings that may be laid on ticks: decoded, held against their range, held back while no clock is set. */
import type { ReadingTarget, Site } from '@stillwell/protocol';
import type { RefusedCause } from '../health.ts';
import { ReadingDecoder } from './decode.ts';
import { HeldReadings } from './held.ts';
import { refusedBecause } from './quality.ts';

/** Where readings go. */
export interface ReadingSink {
  readonly refuse: (channel: number, cause: RefusedCause) => void;
  /** notAfterMs  the latest time that is believed; null: any */
  readonly place: (channel: number, value: number, timeMs: number, notAfterMs: number | null) => void;
}

/** See the file head. */
export class ReadingIntake {
  readonly decoder: ReadingDecoder;
  readonly held = new HeldReadings();
  readonly #sink: ReadingSink;
  readonly #ranges: readonly (readonly [number, number] | null)[];
  /** Of the message being read: what stands for the time of readings without one, and the latest that is believed. */
  #arrivalMs = 0;
  #notAfterMs: number | null = null;
  readonly #target: ReadingTarget = {
    take: (channel, value, timeMs) => this.#reading(channel, value, Number.isNaN(timeMs) ? this.#arrivalMs : timeMs),
    refuse: (channel, cause) => this.#sink.refuse(channel, cause),
  };

  constructor(site: Site, sink: ReadingSink) {
    this.decoder = new ReadingDecoder(site);
    this.#sink = sink;
    this.#ranges = [...site.signals, ...site.inputs].map((channel) => channel.range);
  }

  /** Takes one MQTT message in; `arrivalMs` stands for the time of readings without one; NaN: they are held. */
  message(topic: string, payload: Uint8Array, arrivalMs: number, notAfterMs: number | null): void {
    this.#arrivalMs = arrivalMs;
    this.#notAfterMs = notAfterMs;
    this.decoder.decode(topic, payload, this.#target);
  }

  /** Takes those in that waited. wallMs  of an arrival on the monotonic clock */
  clockIsSet(wallMs: (atMs: number) => number): void {
    this.#notAfterMs = null;
    this.held.release((channel, value, atMs) => this.#reading(channel, value, wallMs(atMs)));
  }

  #reading(channel: number, value: number, timeMs: number): void {
    const cause = refusedBecause(value, this.#ranges[channel]!);
    if (cause !== null) this.#sink.refuse(channel, cause);
    else if (!Number.isNaN(timeMs)) this.#sink.place(channel, value, timeMs, this.#notAfterMs);
    else if (!this.held.hold(channel, value)) this.#sink.refuse(channel, 'clock-unset');
  }
}
