/** A site's topics and payloads: what to subscribe to, and from messages to readings of channels. */
import {
  coversFilter,
  MessageDecoder,
  parseSparkplugSource,
  type ReadingTarget,
  type Site,
  type SparkplugSessions,
  sparkplugFilters,
} from '@stillwell/protocol';

/** A site's mapping from topics to channels. */
export class ReadingDecoder {
  readonly #decoder: MessageDecoder;
  /** Topic filters to subscribe: each once, and none that another one covers, since a broker may then send twice. */
  readonly filters: readonly string[];

  constructor(site: Site) {
    const channels = [...site.signals, ...site.inputs];
    this.#decoder = new MessageDecoder(channels);
    const wanted = channels.flatMap(({ topic, payload }) => {
      if (topic === null) return [];
      const source = payload.kind === 'sparkplug' ? parseSparkplugSource(topic) : null;
      return source === null ? [topic] : sparkplugFilters(source);
    });
    const each = [...new Set(wanted)];
    this.filters = each.filter((filter) => !each.some((other) => other !== filter && coversFilter(other, filter)));
  }

  /** Sessions of the plant's Sparkplug nodes; null where no signal comes from one. */
  get sparkplug(): SparkplugSessions | null {
    return this.#decoder.sparkplug;
  }

  /** Tells `target` of every channel the message speaks of; false where it is none of the site's. */
  decode(topic: string, payload: Uint8Array, target: ReadingTarget): boolean {
    return this.#decoder.decode(topic, payload, target);
  }
}
