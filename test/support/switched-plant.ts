/**
 * A tank that a pump empties between two levels, with a hidden inflow that wanders; seeded. Levels, flows and thresholds
 * are invented and known, so that what is learned can be held against them.
 */
import { seededNumbers } from './models.ts';

/** What may be chosen. */
export interface TankChoice {
  readonly seed?: number;
  readonly ticks?: number;
  /** A second pump starts above this level; null: there is none. */
  readonly secondStart?: number | null;
  /** Share of readings left out at random. */
  readonly missing?: number;
  /** From this tick on the inflow is `flood` higher. */
  readonly floodFrom?: number;
  readonly flood?: number;
}

/** Levels at which the pump starts and stops, what it takes a tick, what flows in on average. */
export const TANK = { start: 2, stop: 1, pump: 0.16, inflow: 0.05, noise: 0.003, running: 8, second: 15 } as const;

/** (2) of (ticks): level and current; NaN where missing. */
export function tankHistory(choice: TankChoice = {}): Float64Array[] {
  const { seed = 1, ticks = 6000, secondStart = null, missing = 0, floodFrom = Number.POSITIVE_INFINITY } = choice;
  const random = seededNumbers(seed);
  const normal = (): number => random() + random() + random() + random() - 2;
  const level = new Float64Array(ticks);
  const current = new Float64Array(ticks);
  let z = 1.5;
  let wander = 0;
  let on = 0;
  for (let t = 0; t < ticks; t++) {
    wander = 0.97 * wander + 0.0008 * normal();
    for (let part = 0; part < 10; part++) {
      if (z >= TANK.start) on = Math.max(on, 1);
      if (secondStart !== null && z >= secondStart) on = 2;
      if (z <= TANK.stop) on = 0;
      z += (TANK.inflow + wander + (t >= floodFrom ? (choice.flood ?? 0) : 0) - on * TANK.pump) / 10;
    }
    level[t] = z + TANK.noise * normal();
    current[t] = [0, TANK.running, TANK.second][on] + 0.1 * normal();
    if (random() < missing) level[t] = Number.NaN;
    if (random() < missing) current[t] = Number.NaN;
  }
  return [level, current];
}

/** The history standardised, missing readings bridged by the last, as the section's learning takes it. */
export function tankInput(history: readonly Float64Array[], learnTicks: number, horizon = 30) {
  const scaling = history.map((y) => {
    const read = y.subarray(0, learnTicks).filter((value) => !Number.isNaN(value));
    const mean = read.reduce((sum, value) => sum + value, 0) / read.length;
    const scale = Math.sqrt(read.reduce((sum, value) => sum + (value - mean) ** 2, 0) / read.length);
    return { mean, scale };
  });
  const isRead = history.map((y) => Uint8Array.from(y, (value) => (Number.isNaN(value) ? 0 : 1)));
  const values = history.map((y, c) => {
    let last = 0;
    return y.map((value) => {
      if (!Number.isNaN(value)) last = (value - scaling[c].mean) / scaling[c].scale;
      return last;
    });
  });
  return {
    scaling,
    input: { values, isRead, signalCount: history.length, horizon, periodTicks: 0, firstTick: 1000, learnTicks },
  };
}
