/**
 * From MQTT messages to readings of channels, by the site file's mapping. Whatever the bytes are, the result is readings
 * or counted refusals; nothing throws past here.
 */
import { matchesFilter, type PayloadReading, ProtocolError, readPayload, type Site } from '@stillwell/protocol';
import type { RefusedCause } from '../health.ts';

/** A finite number for a channel; `timeMs` null where the payload carries no time. */
export interface DecodedReading {
  readonly channel: number;
  readonly value: number;
  readonly timeMs: number | null;
}

interface Route {
  readonly channel: number;
  readonly filter: string;
  readonly payload: PayloadReading;
}

/** Topics remembered; beyond these each message is matched anew, so that a flood of topics costs time, not memory. */
const REMEMBERED_TOPICS = 4096;

/** A site's mapping from topics to channels. */
export class ReadingDecoder {
  readonly #routes: readonly Route[];
  readonly #byTopic = new Map<string, readonly Route[]>();

  constructor(site: Site) {
    this.#routes = [...site.signals, ...site.inputs].flatMap((signal, channel) =>
      signal.topic === null ? [] : [{ channel, filter: signal.topic, payload: signal.payload }],
    );
  }

  /** Topic filters to subscribe, each once. */
  get filters(): readonly string[] {
    return [...new Set(this.#routes.map((route) => route.filter))];
  }

  /** Calls `onReading` for every channel the message speaks of, `onRefused` for every one it should but does not. */
  decode(
    topic: string,
    payload: Uint8Array,
    onReading: (reading: DecodedReading) => void,
    onRefused: (channel: number, cause: RefusedCause) => void,
  ): void {
    for (const { channel, payload: how } of this.#routesOf(topic)) {
      let reading: DecodedReading;
      try {
        reading = { channel, ...readPayload(how, payload) };
      } catch (error) {
        onRefused(channel, causeOf(error));
        continue;
      }
      onReading(reading);
    }
  }

  #routesOf(topic: string): readonly Route[] {
    const known = this.#byTopic.get(topic);
    if (known !== undefined) return known;
    const routes = this.#routes.filter((route) => route.filter === topic || matchesFilter(route.filter, topic));
    if (this.#byTopic.size < REMEMBERED_TOPICS) this.#byTopic.set(topic, routes);
    return routes;
  }
}

function causeOf(error: unknown): RefusedCause {
  const reason = error instanceof ProtocolError ? error.details.reason : undefined;
  return typeof reason === 'string' ? (reason as RefusedCause) : 'syntax';
}
