/**
 * Two tanks, one draining into the other by Torricelli's law, with the published constants of Johansson's laboratory
 * process (IEEE Transactions on Control Systems Technology 8 (2000), table of section II: areas 28 and 32 cm², outlets 0.071
 * and 0.057 cm², 3.33 cm³/s per volt of the pump, 0.5 V/cm of the level sensor; from memory). Where tanks have a rim, what
 * rises above the upper one's falls for its greater part into the lower. Readings in volts, every 4 s.
 */
import { gaussians } from './gaussian.ts';
import { seededNumbers } from './models.ts';

/** A record of the pump's voltage and of the lower level. */
export interface TankRecord {
  /** Volts, held over the tick. */
  readonly pump: Float64Array;
  /** Volts, at the start of the tick. */
  readonly level: Float64Array;
  /** The same without noise. */
  readonly clean: Float64Array;
}

const UPPER = { area: 28, outlet: 0.071 };
const LOWER = { area: 32, outlet: 0.057 };
const GRAVITY = 981;
const PUMP = 3.33;
const SENSOR = 0.5;
const TICK_SECONDS = 4;
const STEPS = 40;
/** Share of what spills over the upper rim that the lower tank catches. */
const CAUGHT = 0.7;

/** Plant choices. */
export interface TankChoice {
  readonly seed: number;
  readonly ticks: number;
  /** cm; Infinity: no rim. */
  readonly rim: number;
  /** Standard deviation of the reading, volts. */
  readonly noise: number;
}

/** Simulates. */
export function runTanks({ seed, ticks, rim, noise }: TankChoice): TankRecord {
  const random = seededNumbers(seed);
  const normal = gaussians(random);
  const pump = pumpVoltage(random, ticks);
  const level = new Float64Array(ticks);
  const clean = new Float64Array(ticks);
  let upper = 8;
  let lower = 10;
  const dt = TICK_SECONDS / STEPS;
  for (let t = 0; t < ticks; t++) {
    clean[t] = SENSOR * lower;
    level[t] = clean[t] + noise * normal();
    for (let k = 0; k < STEPS; k++) {
      const between = UPPER.outlet * Math.sqrt(2 * GRAVITY * upper);
      const out = LOWER.outlet * Math.sqrt(2 * GRAVITY * lower);
      upper = Math.max(0, upper + (dt * (PUMP * pump[t] - between)) / UPPER.area);
      const spilled = Math.max(0, upper - rim) * UPPER.area;
      upper = Math.min(rim, upper);
      lower = Math.max(0, lower + (dt * (between - out) + CAUGHT * spilled) / LOWER.area);
      lower = Math.min(rim, lower);
    }
  }
  return { pump, level, clean };
}

/** Random-phase multisine with its power below a twentieth of the tick rate, held on steps of random length. */
function pumpVoltage(random: () => number, ticks: number): Float64Array {
  const lines = 40;
  const phases = Array.from({ length: lines }, () => 2 * Math.PI * random());
  const period = 1024;
  const wave = Float64Array.from({ length: ticks }, (_, t) => {
    let sum = 0;
    for (let m = 1; m <= lines; m++)
      sum += Math.cos((2 * Math.PI * m * t) / period + phases[m - 1]) / Math.sqrt(lines / 2);
    return sum;
  });
  let held = wave[0];
  let left = 0;
  const out = new Float64Array(ticks);
  const offset = 0.3 * random();
  for (let t = 0; t < ticks; t++) {
    if (left <= 0) {
      held = wave[t];
      left = 4 + Math.floor(12 * random());
    }
    left--;
    out[t] = Math.max(0, 3 + offset + 1.1 * held);
  }
  return out;
}
