/** Readings such as no plant gives for long, for runs that every kind must come through alike. */
import type { CommonModel } from '@stillwell/runtime/filter';
import { seededNumbers } from './models.ts';

/**
 * On the lattice, in units: a swing and a wander; nothing of the last channel for 7 ticks; every tenth reading missing; now
 * and then a spike, a step that stays, a value beyond the clips, a sensor that hangs, a long silence of all channels.
 */
export function roughReadings(model: CommonModel, ticks: number, seed: number): Float64Array[] {
  const random = seededNumbers(seed);
  const nc = model.channelCount;
  const wander = new Float64Array(nc);
  const held = new Float64Array(nc).fill(Number.NaN);
  return Array.from({ length: ticks }, (_, n) => {
    const isSilent = n % 300 >= 200 && n % 300 < 290;
    return Float64Array.from({ length: nc }, (_, c) => {
      wander[c] = 0.97 * wander[c]! + 0.25 * (random() + random() - 1);
      const chance = random();
      const step = n % 120 > 80 ? 2 : 0;
      const spike = chance > 0.98 ? 40 * (random() - 0.5) : 0;
      const z = Math.sin((2 * Math.PI * n) / 24 + c) + wander[c]! + step + spike;
      const raw = model.mean[c]! + model.scale[c]! * z;
      if (n % 90 < 15 && c === 0) held[c] = Number.isNaN(held[c]!) ? raw : held[c]!;
      else held[c] = Number.NaN;
      const value = Number.isNaN(held[c]!) ? raw : held[c]!;
      if (isSilent || chance < 0.1 || (c === nc - 1 && n < 7)) return Number.NaN;
      return onLattice(model, c, value);
    });
  });
}

/** The value of the channel's lattice next to a value. */
export function onLattice(model: CommonModel, c: number, value: number): number {
  const step = model.latticeStep[c]!;
  const offset = model.latticeOffset[c]!;
  return offset + step * Math.round((value - offset) / step);
}
