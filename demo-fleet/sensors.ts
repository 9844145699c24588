/**
 * What stands between a plant and its log: noise, a lattice of steps, drift, and now and then a sensor that sticks.
 */

import type { DemoChannel } from './plants/sites.ts';
import type { Random } from './random.ts';

/** One sensor; reads once a tick. */
export class Sensor {
  /** Added to the truth, in the channel's unit; grows while the sensor drifts. */
  offset = 0;
  /** While true the sensor repeats what it last said. */
  isStuck = false;
  private readonly channel: DemoChannel;
  private readonly random: Random;
  /** Rain not yet tipped, for channels that count. */
  private held = 0;
  private last = 0;

  constructor(channel: DemoChannel, random: Random) {
    this.channel = channel;
    this.random = random;
  }

  /** The reading for a true value: a multiple of the resolution inside the range. */
  read(truth: number): number {
    const { channel } = this;
    const noise = channel.noise === 0 ? 0 : channel.noise * this.random.normal();
    if (this.isStuck) return this.last;
    this.last =
      channel.aggregate === 'sum' ? this.tip(truth) : this.clamp(onLattice(truth + this.offset + noise, channel));
    return this.last;
  }

  private clamp(value: number): number {
    const [low, high] = this.channel.range;
    return Math.min(high, Math.max(low, value));
  }

  /** A tipping bucket tells whole tips only and keeps the rest. */
  private tip(amount: number): number {
    this.held += amount;
    const tips = Math.floor(this.held / this.channel.resolution);
    this.held -= tips * this.channel.resolution;
    return fromStep(tips, this.channel.resolution);
  }
}

/** Nearest multiple of the channel's resolution. */
export function onLattice(value: number, channel: DemoChannel): number {
  return fromStep(Math.round(value / channel.resolution), channel.resolution);
}

/** k steps as the decimal a person would write: k / m where the resolution is 1 / m, so that 0.1 × 3 is 0.3. */
function fromStep(k: number, resolution: number): number {
  const inverse = Math.round(1 / resolution);
  return Math.abs(inverse * resolution - 1) < 1e-9 ? k / inverse : k * resolution;
}
