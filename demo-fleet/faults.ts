/**
 * What goes wrong on the way from the sensors to the broker, on a fixed schedule and a seeded dice: sensors that stick,
 * drift or fall silent, messages that come late or twice. Times are ticks from the start of play.
 */
import type { DemoChannel } from './plants/sites.ts';
import { openRandom, type Random } from './random.ts';
import { Sensor } from './sensors.ts';

/** One scheduled fault, from the first tick up to but not including the last; `channel` is an index. */
export interface Fault {
  readonly kind: 'silent' | 'stuck' | 'drift';
  readonly channel: number;
  readonly from: number;
  readonly until: number;
  /** Drift in the channel's unit; the others leave it at 0. */
  readonly perTick: number;
}

/** How rough the message path is: shares of all messages, and ticks that a late one is held back. */
export interface Roughness {
  readonly lateShare: number;
  readonly lateTicks: number;
  readonly veryLateShare: number;
  readonly veryLateTicks: number;
  readonly doubledShare: number;
}

/** A quiet path. */
export const SMOOTH: Roughness = {
  lateShare: 0,
  lateTicks: 0,
  veryLateShare: 0,
  veryLateTicks: 0,
  doubledShare: 0,
};

/** One message as it is sent. */
export interface SentReading {
  readonly channel: number;
  readonly timeMs: number;
  readonly value: number;
}

/** What a tick brings: the messages to send now, and what the sensors said whether or not it has been sent yet. */
export interface TickTraffic {
  readonly messages: readonly SentReading[];
  /** NaN where the sensor was silent; a late reading counts for its own tick. */
  readonly said: Float64Array;
}

/** Reads the sensors of one site tick by tick and hands out messages in the order in which the broker will see them. */
export class Telemetry {
  readonly counts = { sent: 0, late: 0, veryLate: 0, doubled: 0 };
  private readonly channels: readonly DemoChannel[];
  private readonly sensors: readonly Sensor[];
  private readonly random: Random;
  private readonly held: { dueTick: number; reading: SentReading }[] = [];
  private readonly faults: readonly Fault[];
  private readonly roughness: Roughness;

  constructor(
    channels: readonly DemoChannel[],
    options: {
      readonly name: string;
      readonly seed: number;
      readonly faults?: readonly Fault[];
      readonly roughness?: Roughness;
    },
  ) {
    this.channels = channels;
    this.faults = options.faults ?? [];
    this.roughness = options.roughness ?? SMOOTH;
    this.random = openRandom(options.seed, `path ${options.name}`);
    this.sensors = channels.map(
      (channel) => new Sensor(channel, openRandom(options.seed, `${options.name} ${channel.name}`)),
    );
  }

  /** The traffic of tick `tick` (counted from the start of play), whose readings are taken at `timeMs`. */
  tick(tick: number, timeMs: number, truth: Float64Array): TickTraffic {
    const said = new Float64Array(this.channels.length);
    const messages: SentReading[] = [];
    this.release(tick, messages);
    for (let channel = 0; channel < this.channels.length; channel++) {
      const silent = this.applyFaults(tick, channel);
      const value = this.sensors[channel].read(truth[channel]);
      said[channel] = silent ? Number.NaN : value;
      if (!silent) this.send(tick, { channel, timeMs, value }, messages);
    }
    this.counts.sent += messages.length;
    return { messages, said };
  }

  /** Everything still held back, for the end of play. */
  drain(): readonly SentReading[] {
    const rest = this.held.splice(0).map((entry) => entry.reading);
    this.counts.sent += rest.length;
    return rest;
  }

  private release(tick: number, messages: SentReading[]): void {
    for (let i = this.held.length - 1; i >= 0; i--) {
      if (this.held[i].dueTick > tick) continue;
      messages.push(this.held[i].reading);
      this.held.splice(i, 1);
    }
  }

  /** Sets the sensor's state for this tick; true while it is silent. */
  private applyFaults(tick: number, channel: number): boolean {
    const sensor = this.sensors[channel];
    let silent = false;
    let stuck = false;
    for (const fault of this.faults) {
      if (fault.channel !== channel || tick < fault.from || tick >= fault.until) continue;
      if (fault.kind === 'silent') silent = true;
      else if (fault.kind === 'stuck') stuck = true;
      else sensor.offset += fault.perTick;
    }
    sensor.isStuck = stuck;
    return silent;
  }

  private send(tick: number, reading: SentReading, messages: SentReading[]): void {
    const { roughness, counts } = this;
    const dice = this.random.uniform();
    // A counted tick must arrive once and in its own tick's order or the count itself would change.
    if (this.channels[reading.channel].aggregate === 'sum') messages.push(reading);
    else if (dice < roughness.veryLateShare) {
      counts.veryLate++;
      this.held.push({ dueTick: tick + roughness.veryLateTicks, reading });
    } else if (dice < roughness.veryLateShare + roughness.lateShare) {
      counts.late++;
      this.held.push({ dueTick: tick + roughness.lateTicks, reading });
    } else if (dice < roughness.veryLateShare + roughness.lateShare + roughness.doubledShare) {
      counts.doubled++;
      messages.push(reading, reading);
    } else messages.push(reading);
  }
}
