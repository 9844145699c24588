/** Lives of a gateway whose outlooks a test scripts, for what its warnings then say, keep on disk and leave at the broker. */
import { type LimitWarning, parseSite, parseWarningMessage, topicsOf } from '@stillwell/protocol';
import { modelFromBundle } from '@stillwell/runtime/filter';
import { expect } from 'vitest';
import type { Outgoing } from '../../runtime/mqtt/connection.ts';
import type { Occasion } from '../../runtime/publish/moment.ts';
import { LIMITS, type Outlook } from '../../runtime/publish/outlooks.ts';
import { Warnings } from '../../runtime/publish/warnings.ts';
import { Serving } from '../../runtime/serving.ts';
import type { MemoryDisk } from './memory-disk.ts';
import { syntheticBundle } from './models.ts';
import { SITE_TEXT } from './running-site.ts';

/** Tick 1 min, horizon 24: a warning closes after 2 ticks, renewed every 6. */
export const site = parseSite(
  SITE_TEXT.replace('limits: { high: 14 }', 'limits: { high_high: 15, high: 14, low: 5 }'),
  'site',
);
const topics = topicsOf(site.root, site.site);
/** Where warnings of the level go. */
export const TOPIC = topics.warning('level');
const bundle = syntheticBundle({ signals: ['level', 'flow'], inputs: ['pump'], tickMs: 60_000, warmupTicks: 3 });
/** The bundle that serves. */
export const checked = { bundle, model: modelFromBundle(bundle), digest: new Uint8Array(32), epoch: 1, sequence: 1 };
/** First tick of a life. */
export const FIRST = 29_000_000;

/** One gateway's life beside a broker, shared by all lives, that keeps what is retained. */
export class Life {
  readonly disk: MemoryDisk;
  readonly serving = new Serving(checked);
  readonly warnings: Warnings;
  readonly log: string[] = [];
  /** What the broker keeps, by topic. */
  static retained = new Map<string, Uint8Array>();
  /** Everything it was told. */
  static heard: { topic: string; text: string; retain: boolean; expiry: number | undefined }[] = [];
  isReady = true;
  failing = false;
  tick: number;

  /** The broker as it was before anything was said. */
  static forget(): void {
    Life.retained = new Map();
    Life.heard = [];
  }

  constructor(disk: MemoryDisk, tick: number, text: typeof site = site) {
    this.disk = disk;
    this.tick = tick;
    const take = (line: string): void => void this.log.push(line);
    this.warnings = new Warnings({
      site: text,
      topics,
      disk,
      folder: 'data',
      log: { debug: take, info: take, warn: take, error: take },
      isWallTime: true,
      isReady: () => this.isReady,
      publish: (message) => this.#publish(message),
    });
    for (let k = 6; k > 0; k--) this.serving.step(tick - k, Float64Array.of(10, 10, 10));
  }

  async #publish({ topic, payload, qos, retain, expirySeconds }: Outgoing): Promise<void> {
    expect(qos).toBe(1);
    if (this.failing) throw new Error('lost');
    const bytes = payload as Uint8Array;
    Life.heard.push({ topic, text: new TextDecoder().decode(bytes), retain, expiry: expirySeconds });
    if (!retain) return;
    if (bytes.length === 0) Life.retained.delete(topic);
    else Life.retained.set(topic, bytes);
  }

  /** Steps a tick with a reading of the level, and says these probabilities of its limits, in the order of LIMITS. */
  async step(level: number, chances: Partial<Record<'high_high' | 'high' | 'low', number>>, isCatchingUp = false) {
    this.serving.step(this.tick, Float64Array.of(level, 10, 10));
    await this.look(chances, isCatchingUp);
    this.tick++;
  }

  /** Takes the tick in once more, also of another filter. */
  async look(chances: Partial<Record<string, number>>, isCatchingUp = false, serving = this.serving): Promise<void> {
    const issuedAtMs = (serving.tick + 1) * 60_000;
    const plans = undefined as never;
    const occasion: Occasion = { site, gateway: 'g1', issuedAtMs, isCatchingUp, plans, inputs: [] };
    const outlooks = LIMITS.flatMap(([limit, key, side]): Outlook[] => {
      const value = site.signals[0]!.limits[key];
      const probability = chances[limit] ?? 0.01;
      const likely = probability > 0.5 ? 7 : null;
      return value === null
        ? []
        : [{ limit, key, side, value, probability, earliest: likely && 3, step: likely, likely, latest: null }];
    });
    this.warnings.tick(serving, occasion, [outlooks, []]);
    await settled();
  }
}

/** Once messages on their way have arrived. */
export const settled = (): Promise<void> => new Promise((resolve) => setImmediate(resolve));
/** What was said so far, blanked topics left out. */
export const words = (): { topic: string; retain: boolean; open: number; warnings: LimitWordsOf[] }[] =>
  Life.heard.flatMap(({ topic, text, retain }) => {
    if (text === '') return [];
    const { open, warnings } = parseWarningMessage(new TextEncoder().encode(text));
    return [{ topic, retain, open, warnings: warnings.map(({ limit, status }) => [limit, status]) }];
  });
type LimitWordsOf = [LimitWarning['limit'], LimitWarning['status']];
/** The same as limits and statuses, one after another. */
export const said = () => words().flatMap((one) => one.warnings);
/** The message heard last. */
export const last = () =>
  parseWarningMessage(new TextEncoder().encode(Life.heard.findLast(({ text }) => text !== '')!.text));
/** A tick's time as messages have it. */
export const at = (tick: number): string => new Date(tick * 60_000).toISOString();
