/**
 * Sparkplug B payloads made by a program that is not ours: sparkplug-payload 1.0.3 (npm, EPL-2.0, tests only), an encoder
 * generated from the standard's message definition.
 */
import { createRequire } from 'node:module';
import { parseSparkplugTopic, type SparkplugTopic } from '../../protocol/sparkplug/topic.ts';

/** A metric as that encoder wants it. */
export interface MadeMetric {
  readonly name?: string;
  readonly alias?: number;
  readonly timestamp?: number;
  /** Datatype by name; 'UInt64' and the like. */
  readonly type: string;
  readonly value: unknown;
  readonly isHistorical?: boolean;
  readonly isNull?: boolean;
  readonly properties?: Readonly<Record<string, { readonly type: string; readonly value: unknown }>>;
}

/** A payload as that encoder wants it. */
export interface MadePayload {
  readonly timestamp?: number;
  readonly metrics?: readonly MadeMetric[];
  readonly seq?: number;
}

interface Codec {
  encodePayload(payload: MadePayload): Uint8Array;
}

const library = createRequire(import.meta.url)('sparkplug-payload') as { get(namespace: string): Codec };

const codec: Codec = library.get('spBv1.0');

/** Bytes of a payload. */
export const sparkplugBytes = (payload: MadePayload): Uint8Array => codec.encodePayload({ metrics: [], ...payload });

/** A topic that must be one. */
export const sparkplugTopic = (text: string): SparkplugTopic => {
  const topic = parseSparkplugTopic(text);
  if (topic === null) throw new Error(`${text} is no Sparkplug topic`);
  return topic;
};
