/**
 * Warnings that a limit will probably be crossed: every tick's outlooks go through the signals' warnings, and what is worth
 * saying is published, retained, at QoS 1. Kept on disk before it is said, so that after a restart what was open goes on
 * under the same `since`. What did not get through is said again with the next tick; nothing queues while the broker is away.
 *
 * When the last warning of a signal ends, its last word goes out not retained and the topic is blanked: whoever listens hears
 * the end, and whoever comes later finds nothing, also where the gateway never comes back.
 */
import { type LimitWarning, type MessageHead, type Site, type SiteTopics, warningMessage } from '@stillwell/protocol';
import { FOLDED, fadeTicks, standsStill } from '@stillwell/runtime/filter';
import type { Disk } from '../disk.ts';
import type { Log } from '../log.ts';
import type { Outgoing } from '../mqtt/connection.ts';
import type { Serving } from '../serving.ts';
import { expiryOf, headOf, type Occasion, validUntil } from './moment.ts';
import type { Outlook } from './outlooks.ts';
import { judge, STALE_TICKS } from './quality.ts';
import { keepWarnings, keptWarnings } from './warnings-memory.ts';
import { SignalWarnings, type Trust } from './warnings-signal.ts';
import { renewTicks } from './warnings-track.ts';

const JSON_TYPE = 'application/json';
const NOTHING = new Uint8Array(0);

/** Where warnings go and are kept. */
export interface WarningPorts {
  readonly site: Site;
  readonly topics: SiteTopics;
  readonly disk: Disk;
  readonly folder: string;
  readonly log: Log;
  /** Whether times are the wall clock's. */
  readonly isWallTime: boolean;
  /** Whether the broker takes something now. */
  readonly isReady: () => boolean;
  /** Resolves when the broker has it. */
  readonly publish: (message: Outgoing) => Promise<void>;
}

/** Tick closed last, the moment of the message, and how many ticks ahead are looked at. */
interface Now {
  readonly tick: number;
  readonly issuedAtMs: number;
  readonly horizon: number;
}

/** A warning that is open, as it would be said now. */
export interface OpenNow extends LimitWarning {
  readonly signal: string;
}

/** See the file head. */
export class Warnings {
  /** Warnings opened since the start. */
  opened = 0;
  readonly #ports: WarningPorts;
  readonly #signals: readonly SignalWarnings[];
  /** Topics that may still hold what an earlier life left there. */
  readonly #toBlank = new Set<string>();
  #fault: string | null = null;

  constructor(ports: WarningPorts) {
    const { site, topics, disk, folder, log } = ports;
    this.#ports = ports;
    this.#signals = site.signals.map((_, i) => new SignalWarnings(site, i));
    for (const { name, limits } of site.signals)
      if (Object.values(limits).some((value) => value !== null)) this.#toBlank.add(topics.warning(name));
    const kept = keptWarnings(disk, folder);
    if (kept === 'damaged') log.warn('warnings.json in the data folder is damaged: open warnings will open once more');
    for (const one of kept === 'damaged' ? [] : kept) {
      const at = site.signals.findIndex(({ name }) => name === one.signal);
      if (at >= 0) this.#signals[at]!.restore(one);
      else this.#toBlank.add(topics.warning(one.signal));
    }
  }

  /** Warnings open now. */
  get open(): number {
    return this.#signals.reduce((sum, one) => sum + one.openCount, 0);
  }

  /** What is open now, by signal. */
  openNow(): readonly OpenNow[] {
    return this.#signals.flatMap((one, i) => {
      const { name: signal } = this.#ports.site.signals[i]!;
      const open = one.words().filter(({ status }) => status === 'opened' || status === 'updated');
      return open.map((word) => ({ ...word, signal }));
    });
  }

  /** After a reconnect: a broker that came back may have forgotten what it retained. */
  reconnected(): void {
    for (const one of this.#signals) if (one.openCount > 0) one.isDue = true;
  }

  /** Takes a tick in. outlooks  of each signal, as of this tick */
  tick(serving: Serving, occasion: Occasion, outlooks: readonly (readonly Outlook[])[]): void {
    // Behind an interruption the next tick knows more; what is open stays so.
    if (occasion.isCatchingUp) return;
    for (const [i, one] of this.#signals.entries())
      this.opened += one.look(serving.tick, outlooks[i]!, readingOf(serving, i), trustOf(serving, i));
    const now = { tick: serving.tick, issuedAtMs: occasion.issuedAtMs, horizon: serving.model.horizon };
    this.#say((i) => headOf(serving, occasion, i), now);
  }

  /** No bundle serves: nothing can be said any more. tick  closed last */
  without(head: Pick<MessageHead, 'site' | 'gateway' | 'issuedAtMs'>, tick: number): void {
    const reason = 'no bundle serves';
    for (const one of this.#signals) one.expire(reason);
    const failed = {
      ...head,
      bundle: null,
      sequence: null,
      validUntilMs: 0,
      quality: 'F' as const,
      qualityReason: reason,
    };
    this.#say(() => failed, { tick, issuedAtMs: head.issuedAtMs, horizon: this.#ports.site.horizon });
  }

  #say(headOfSignal: (signal: number) => MessageHead, now: Now): void {
    const due = this.#signals.flatMap((one, i) => (one.isDue ? [{ one, i }] : []));
    const isReady = this.#ports.isReady();
    if (due.length > 0 && isReady) for (const { one } of due) one.sent();
    if ((due.length > 0 && isReady) || this.#signals.some(({ hasChanged }) => hasChanged)) this.#keep();
    if (!isReady) return;
    for (const { one, i } of due) this.#publish(one, i, headOfSignal(i), now);
    this.#blankOld();
  }

  #publish(one: SignalWarnings, signal: number, head: MessageHead, { tick, issuedAtMs, horizon }: Now): void {
    const { site, topics, publish, log, isWallTime } = this.#ports;
    const { name, unit } = site.signals[signal]!;
    const { tickMs } = site;
    const words = one.words();
    if (words.length === 0) return;
    const validUntilMs = validUntil(tick + renewTicks(site.horizon), site);
    const about = { signal: name, unit, originMs: tick * tickMs, tickMs, horizon };
    const payload = warningMessage({ ...head, validUntilMs, ...about, warnings: words });
    const topic = topics.warning(name);
    this.#toBlank.delete(topic);
    const isOpen = one.openCount > 0;
    const expiry = expiryOf(isWallTime, validUntilMs, issuedAtMs);
    const said = publish({ topic, payload, qos: 1, retain: isOpen, contentType: JSON_TYPE, ...expiry });
    const blanked = isOpen ? null : publish({ topic, payload: NOTHING, qos: 1, retain: true });
    Promise.all([said, blanked]).then(
      () => {
        one.arrived(words);
        if (one.hasChanged) this.#keep();
      },
      (error: Error) => {
        log.debug(error.message);
        one.failed();
      },
    );
  }

  /** An earlier life may have ended while a warning was open that nobody remembers. */
  #blankOld(): void {
    for (const topic of this.#toBlank) {
      this.#toBlank.delete(topic);
      this.#ports.publish({ topic, payload: NOTHING, qos: 1, retain: true }).catch(() => this.#toBlank.add(topic));
    }
  }

  #keep(): void {
    const { disk, folder, log } = this.#ports;
    try {
      keepWarnings(
        disk,
        folder,
        this.#signals.flatMap((one) => one.toKeep()),
      );
      for (const one of this.#signals) one.hasChanged = false;
      this.#fault = null;
    } catch (error) {
      const fault = (error as Error).message;
      if (fault !== this.#fault)
        log.warn(`open warnings not kept on disk: ${fault}; after a restart they open once more`);
      this.#fault = fault;
    }
  }
}

/** The tick's own reading in its unit; NaN where there was none, or none that counts. */
export function readingOf({ model, state }: Serving, signal: number): number {
  if (state.observed[signal] !== FOLDED) return Number.NaN;
  return model.mean[signal]! + model.scale[signal]! * state.reading[signal]!;
}

/** A signal that is not heard opens nothing, and nothing of it is known once its forecast fades to the season. */
export function trustOf(serving: Serving, signal: number): Trust {
  const { model, state } = serving;
  if (serving.isWarming) return { kind: 'none', reason: judge(serving, false, signal, null).qualityReason! };
  const age = state.age[signal]!;
  if (age >= fadeTicks(model)) return { kind: 'none', reason: `no reading for ${age} ticks or more` };
  return { kind: age >= STALE_TICKS || standsStill(model, state, signal) ? 'blind' : 'good' };
}
