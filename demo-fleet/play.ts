/**
 * Plays one site's readings into the broker as fast as its gateway takes them. The gateway's own published origins are
 * the pace: play runs at most a window of ticks ahead of the last one heard, so that days pass in seconds and nothing has
 * to be dropped anywhere.
 */
import type { SentReading, TickTraffic } from './faults.ts';
import { LATENESS_TICKS, payloadOf, readingTopic, type SiteDescription } from './site-files.ts';

/** What a site says at each tick of play, and when its readings are taken. */
export interface ReadingSource {
  /** The traffic of absolute tick `tick`. */
  next(tick: number): TickTraffic;
  /** What is still held back at the end. */
  drain(): readonly SentReading[];
}

/** Publishes one message, QoS 1; resolves when the broker has it. */
export type Publish = (topic: string, payload: string) => Promise<void>;

/** What a play sends, to whom, and how far ahead of the answers. */
export interface PlayOptions {
  readonly description: SiteDescription;
  readonly source: ReadingSource;
  readonly firstTick: number;
  readonly publish: Publish;
  /** Ticks that may be under way: sent but not yet answered by a forecast or state. */
  readonly window: number;
  /** Called once a tick, with everything the sensors said, late or not. */
  readonly onSaid: (tick: number, said: Float64Array) => void;
  /** Seconds without any answer before play gives up. */
  readonly patienceSeconds: number;
}

/**
 * A tick closes when event time passes its end by the lateness. A reading taken within a tick therefore closes the tick
 * this many before its own.
 */
const CLOSING_LAG = LATENESS_TICKS + 1;
/** Messages whose acknowledgement by the broker may be outstanding. */
const UNACKNOWLEDGED = 24;
const RETRIES = 20;
const RETRY_MS = 250;

/** One site at play. */
export class SitePlay {
  /** Newest tick the gateway is known to have closed. */
  closedTick: number;
  /** Tick to be sent next. */
  tick: number;
  messages = 0;
  private readonly options: PlayOptions;
  private wake: () => void = () => {};
  private readonly underWay = new Set<Promise<void>>();
  private failure: Error | null = null;

  constructor(options: PlayOptions) {
    this.options = options;
    this.tick = options.firstTick;
    this.closedTick = options.firstTick - CLOSING_LAG - 1;
  }

  /** The gateway answered for tick `origin`. */
  noteClosed(origin: number): void {
    if (origin <= this.closedTick) return;
    this.closedTick = origin;
    this.wake();
  }

  /** Ends the play with an error at its next step. */
  fail(error: Error): void {
    this.failure = error;
    this.wake();
  }

  /** Sends ticks up to but not including `untilTick`, then waits until the gateway has closed all that can close. */
  async playUntil(untilTick: number): Promise<void> {
    const { description, source, window, onSaid } = this.options;
    while (this.tick < untilTick) {
      await this.untilClosed(this.tick - CLOSING_LAG - window);
      const { messages, said } = source.next(this.tick);
      onSaid(this.tick, said);
      await this.send(description, messages);
      this.tick++;
    }
    await Promise.all(this.underWay);
    await this.untilClosed(this.tick - 1 - CLOSING_LAG);
  }

  /** Sends what the path still holds back; to be called once, after the last tick. */
  async finish(): Promise<void> {
    await this.send(this.options.description, this.options.source.drain());
    await Promise.all(this.underWay);
  }

  private async send(description: SiteDescription, messages: readonly SentReading[]): Promise<void> {
    for (const { channel, timeMs, value } of messages) {
      this.messages++;
      const topic = readingTopic(description.name, description.channels[channel].name);
      const sending = this.deliver(topic, payloadOf(description.style, value, timeMs))
        .catch((error: Error) => this.fail(error))
        .finally(() => this.underWay.delete(sending));
      this.underWay.add(sending);
      if (this.underWay.size >= UNACKNOWLEDGED) await Promise.race(this.underWay);
    }
  }

  private async deliver(topic: string, payload: string): Promise<void> {
    for (let attempt = 1; ; attempt++) {
      try {
        return await this.options.publish(topic, payload);
      } catch (error) {
        if (attempt === RETRIES) throw error;
        await new Promise((resolve) => setTimeout(resolve, RETRY_MS));
      }
    }
  }

  private async untilClosed(tick: number): Promise<void> {
    while (this.closedTick < tick && this.failure === null) {
      const before = this.closedTick;
      const answered = await this.answer();
      if (!answered && this.closedTick === before) {
        const { name } = this.options.description;
        throw new Error(
          `${name}: no forecast for ${this.options.patienceSeconds} s; sent up to tick ${this.tick - 1}, ` +
            `answered up to ${this.closedTick}; see the gateway's log`,
        );
      }
    }
    if (this.failure !== null) throw this.failure;
  }

  /** True as soon as anything is heard, false after the patience. */
  private answer(): Promise<boolean> {
    return new Promise((resolve) => {
      const timer = setTimeout(() => resolve(false), this.options.patienceSeconds * 1000);
      this.wake = () => {
        clearTimeout(timer);
        resolve(true);
      };
    });
  }
}
