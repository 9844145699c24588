/**
 * From MQTT messages to readings of channels, by a site file's mapping. A message is taken apart once, however many
 * signals it speaks of. Whatever the bytes are, the result is readings or refusals by cause; nothing throws past here. The
 * gateway and the trainer's captures read alike, so that what is learned is what will be seen.
 */
import { type Conversion, conversionOf, convert } from './conversion.ts';
import { BadPayload, type PayloadForm, readDocument } from './payload/document.ts';
import { goodTest } from './payload/good.ts';
import { type Picked, Picker } from './payload/pick.ts';
import type { ReadingTarget } from './reading-target.ts';
import type { PayloadReading, Signal } from './site.ts';
import { type SparkplugRoute, SparkplugSessions } from './sparkplug/sessions.ts';
import { parseSparkplugSource, parseSparkplugTopic, type SparkplugTopic } from './sparkplug/topic.ts';
import { matchesFilter } from './topics.ts';

/** The keys of a signal that say where its readings come from. */
export type DecodedSignal = Pick<Signal, 'topic' | 'payload' | 'unit' | 'sentIn' | 'scale' | 'offset'>;

interface Route {
  readonly channel: number;
  readonly filter: string;
  readonly form: PayloadForm;
  readonly picker: Picker;
  readonly conversion: Conversion | null;
}

/** What is known of a topic: routes by form, and its Sparkplug levels where some signal is read by that standard. */
interface TopicPlan {
  readonly forms: readonly (readonly [PayloadForm, readonly Route[]])[];
  readonly sparkplug: SparkplugTopic | null;
}

/** Topics remembered; beyond these each message is matched anew, so that a flood of topics costs time, not memory. */
const REMEMBERED_TOPICS = 4096;
const FORMS: readonly PayloadForm[] = ['number', 'json', 'msgpack'];
const WHOLE = { value: '', time: null, quality: null, good: null };

const routeOf = (signal: DecodedSignal, channel: number): Route[] => {
  const { topic, payload } = signal;
  if (topic === null || payload.kind === 'sparkplug') return [];
  const picker = new Picker(payload.kind === 'number' ? WHOLE : payload);
  return [{ channel, filter: topic, form: payload.kind, picker, conversion: conversionOf(signal) }];
};

const goodTestOf = ({ good }: Extract<PayloadReading, { kind: 'sparkplug' }>) =>
  good === null ? null : goodTest(good);

const sparkplugRouteOf = (signal: DecodedSignal, channel: number): SparkplugRoute[] => {
  const { topic, payload } = signal;
  if (topic === null || payload.kind !== 'sparkplug') return [];
  const source = parseSparkplugSource(topic);
  if (source === null) return [];
  const { metric } = payload;
  return [{ source, channel, metric, isGood: goodTestOf(payload), conversion: conversionOf(signal) }];
};

/** See the file head. */
export class MessageDecoder {
  readonly #routes: readonly Route[];
  readonly #plans = new Map<string, TopicPlan>();
  readonly #picked: Picked = { value: Number.NaN, timeMs: Number.NaN, at: '', got: undefined };
  /** Null where no signal is read by that standard. */
  readonly sparkplug: SparkplugSessions | null;

  /** signals  by channel */
  constructor(signals: readonly DecodedSignal[]) {
    this.#routes = signals.flatMap(routeOf);
    const metrics = signals.flatMap(sparkplugRouteOf);
    this.sparkplug = metrics.length === 0 ? null : new SparkplugSessions(metrics);
  }

  /** Tells `target` what the message says; false where no signal listens to its topic. */
  decode(topic: string, payload: Uint8Array, target: ReadingTarget): boolean {
    const { forms, sparkplug } = this.#planOf(topic);
    for (let i = 0; i < forms.length; i++) {
      const [form, routes] = forms[i]!;
      this.#read(form, routes, payload, target);
    }
    const isTaken = sparkplug !== null && this.sparkplug!.take(sparkplug, payload, target);
    return isTaken || forms.length > 0;
  }

  #read(form: PayloadForm, routes: readonly Route[], payload: Uint8Array, target: ReadingTarget): void {
    const document = readDocument(form, payload);
    const picked = this.#picked;
    for (let i = 0; i < routes.length; i++) {
      const { channel, picker, conversion } = routes[i]!;
      if (document instanceof BadPayload) target.refuse(channel, document.reason, '', document.got);
      else {
        const reason = picker.pick(document, picked);
        const value = convert(conversion, picked.value);
        if (reason !== null) target.refuse(channel, reason, picked.at, picked.got);
        else if (Number.isFinite(value)) target.take(channel, value, picked.timeMs);
        else target.refuse(channel, 'value', '', picked.value);
      }
    }
  }

  #planOf(topic: string): TopicPlan {
    const known = this.#plans.get(topic);
    if (known !== undefined) return known;
    const routes = this.#routes.filter(({ filter }) => filter === topic || matchesFilter(filter, topic));
    const forms = FORMS.map((form) => [form, routes.filter((route) => route.form === form)] as const);
    const plan = {
      forms: forms.filter(([, own]) => own.length > 0),
      sparkplug: this.sparkplug === null ? null : parseSparkplugTopic(topic),
    };
    if (this.#plans.size < REMEMBERED_TOPICS) this.#plans.set(topic, plan);
    return plan;
  }
}
