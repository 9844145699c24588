/**
 * What a while of listening says of a site file: signal by signal what came, what was refused and why, and what came that
 * nobody takes. For `check`; a running gateway counts, it does not remember.
 */
import {
  metricNames,
  nearestName,
  parseSparkplugSource,
  parseSparkplugTopic,
  type ReadingTarget,
  refusalText,
  type Signal,
  type Site,
} from '@stillwell/protocol';
import type { RefusedCause } from '../health.ts';
import { ReadingDecoder } from './decode.ts';
import { nearestTopics } from './nearest-topics.ts';
import { PlanKeeper } from './plans.ts';
import { refusedBecause } from './quality.ts';

/** Refusals of one cause. */
export interface HeardCause {
  count: number;
  /** Of the last one: what, where, expected, got. */
  example: string;
}

/** The last reading of a channel. */
export interface HeardReading {
  readonly value: number;
  /** Ms since 1970 by the payload; null: it carries no time. */
  readonly timeMs: number | null;
  readonly arrivedMs: number;
  /** The broker had kept it; it may be old. */
  readonly isKept: boolean;
}

/** What was heard of one channel or plan. */
export interface HeardChannel {
  readonly name: string;
  readonly role: 'signal' | 'input' | 'plan';
  /** As the site file has it. */
  readonly topic: string | null;
  readonly unit: string;
  readonly topics: Set<string>;
  readings: number;
  last: HeardReading | null;
  readonly refused: Map<string, HeardCause>;
}

/** A topic that nobody takes. */
export interface HeardTopic {
  count: number;
  /** The last payload, in a few words. */
  example: string;
}

const MOST_TOPICS = 200;
const MOST_SHOWN = 40;
const MOST_METRICS = 5000;
const MOST_TOPICS_A_CHANNEL = 50;

function payloadText(payload: Uint8Array): string {
  const text = Buffer.from(payload.subarray(0, 4 * MOST_SHOWN)).toString('utf8');
  if (/[\p{Cc}\ufffd]/u.test(text.replace(/[\r\n\t]/g, ' '))) return `${payload.length} bytes`;
  const line = text.replace(/\s+/g, ' ').trim();
  return line.length > MOST_SHOWN ? `${line.slice(0, MOST_SHOWN - 1)}…` : line;
}

const channelOf = (signal: Signal, role: 'signal' | 'input'): HeardChannel => ({
  name: signal.name,
  role,
  topic: signal.topic,
  unit: signal.unit,
  topics: new Set(),
  readings: 0,
  last: null,
  refused: new Map(),
});

/** See the file head. */
export class HeardSite {
  readonly channels: readonly HeardChannel[];
  readonly plans: readonly HeardChannel[];
  /** Topics that came and that nobody takes; `moreTopics` of them are not remembered. */
  readonly unmatched = new Map<string, HeardTopic>();
  moreTopics = 0;
  readonly decoder: ReadingDecoder;
  readonly planKeeper: PlanKeeper;
  readonly #signals: readonly Signal[];
  readonly #own: string;
  /** Names of metrics by node and device, as their births had them. */
  readonly #births = new Map<string, readonly string[]>();
  /** Of the message being read. */
  #topic = '';
  #nowMs = 0;
  #isKept = false;
  readonly #target: ReadingTarget = {
    take: (channel, value, timeMs) => this.#take(channel, value, timeMs),
    refuse: (channel, reason, at, got) => this.#refuse(channel, reason, refusalText(reason, at, got)),
  };

  constructor(site: Site) {
    this.decoder = new ReadingDecoder(site);
    this.planKeeper = new PlanKeeper(site);
    this.#signals = [...site.signals, ...site.inputs];
    this.#own = `${site.root}/${site.site}/`;
    this.channels = this.#signals.map((signal, i) => channelOf(signal, i < site.signals.length ? 'signal' : 'input'));
    const planned = site.inputs.filter(({ planTopic }) => planTopic !== null);
    this.plans = planned.map((input) => ({ ...channelOf(input, 'input'), role: 'plan', topic: input.planTopic }));
  }

  /** Takes a message down. */
  message(topic: string, payload: Uint8Array, isKept: boolean, nowMs: number): void {
    if (topic.startsWith(this.#own)) return;
    this.#topic = topic;
    this.#nowMs = nowMs;
    this.#isKept = isKept;
    this.#noteBirth(topic, payload);
    const isPlan = this.#plan(topic, payload);
    if (!this.decoder.decode(topic, payload, this.#target) && !isPlan) this.#unmatched(topic, payload);
  }

  /** Why a channel is silent, as far as can be told: what to do, or the topics heard that come nearest; null: it is not. */
  hint(index: number): string | null {
    const channel = this.channels[index]!;
    if (channel.topic === null) return 'no topic in the site file';
    if (this.#signals[index]!.payload.kind === 'sparkplug') return this.#sparkplugHint(index);
    if (channel.readings > 0 || channel.refused.size > 0) return null;
    return this.#nearest(channel.topic);
  }

  /** The topics heard that come nearest to a silent plan's; null where there are none. */
  planHint({ topic, readings, refused }: HeardChannel): string | null {
    return readings > 0 || refused.size > 0 ? null : this.#nearest(topic!);
  }

  #nearest(topic: string): string | null {
    const near = nearestTopics(topic, this.unmatched.keys());
    return near.length === 0 ? null : `did you mean ${near.join(' or ')}?`;
  }

  #take(channel: number, value: number, timeMs: number): void {
    const { range, unit } = this.#signals[channel]!;
    const cause = refusedBecause(value, range);
    if (cause !== null) {
      this.#refuse(channel, cause, `expected ${range![0]} to ${range![1]} ${unit}, got ${value}`);
      return;
    }
    const one = this.channels[channel]!;
    this.#noteTopic(one);
    one.readings++;
    const own = Number.isNaN(timeMs) ? null : timeMs;
    one.last = { value, timeMs: own, arrivedMs: this.#nowMs, isKept: this.#isKept };
  }

  #refuse(channel: number, cause: RefusedCause, example: string): void {
    this.#noteTopic(this.channels[channel]!);
    count(this.channels[channel]!.refused, cause, example);
  }

  #noteTopic({ topics }: HeardChannel): void {
    if (topics.size < MOST_TOPICS_A_CHANNEL) topics.add(this.#topic);
  }

  #plan(topic: string, payload: Uint8Array): boolean {
    const outcomes = this.planKeeper.take(topic, payload, this.#nowMs);
    for (const { input, kind, cause, text } of outcomes) {
      const plan = this.plans.find(({ name }) => name === input)!;
      this.#noteTopic(plan);
      if (kind === 'refused') count(plan.refused, cause, text);
      else plan.readings++;
    }
    return outcomes.length > 0;
  }

  #unmatched(topic: string, payload: Uint8Array): void {
    if (!this.unmatched.has(topic) && this.unmatched.size >= MOST_TOPICS) this.moreTopics++;
    else count(this.unmatched, topic, payloadText(payload));
  }

  #noteBirth(topic: string, payload: Uint8Array): void {
    const parsed = this.decoder.sparkplug === null ? null : parseSparkplugTopic(topic);
    if (parsed === null || !parsed.type.endsWith('BIRTH') || this.#births.size >= MOST_TOPICS) return;
    this.#births.set(sourceName(parsed), metricNames(payload, MOST_METRICS));
  }

  #sparkplugHint(index: number): string | null {
    const { topic, payload } = this.#signals[index]!;
    const source = parseSparkplugSource(topic!)!;
    const name = sourceName(source);
    const metric = payload.kind === 'sparkplug' ? payload.metric : '';
    let hint: string | null = null;
    this.decoder.sparkplug!.states((channel, { state, isNamed }) => {
      if (channel !== index) return;
      if (state === 'gone') hint = `${name} has said goodbye, or the broker in its name`;
      else if (state === 'unheard') hint = this.#unheard(name);
      else if (!isNamed) {
        const near = nearestName(metric, this.#births.get(name) ?? []);
        hint = `the birth of ${name} names no metric "${metric}"${near === null ? '' : `; did you mean "${near}"?`}`;
      }
    });
    return hint;
  }

  #unheard(name: string): string {
    const others = [...this.#births.keys()];
    const near = nearestName(name, others);
    if (near !== null && near !== name) return `no birth of ${name} came, but one of ${near}`;
    return `no birth of ${name} came; it comes when the node reconnects, or when somebody who may command it asks (Node Control/Rebirth), which this gateway never does`;
  }
}

const sourceName = ({ group, node, device }: { group: string; node: string; device: string | null }): string =>
  device === null ? `${group}/${node}` : `${group}/${node}/${device}`;

function count(counts: Map<string, HeardCause>, key: string, example: string): void {
  const known = counts.get(key);
  if (known === undefined) counts.set(key, { count: 1, example });
  else {
    known.count++;
    known.example = example;
  }
}
