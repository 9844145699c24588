/** Chaotic plants with published constants, read through noise. */
import { gaussians } from './gaussian.ts';
import { seededNumbers } from './models.ts';

const SETTLE = 300;
const STEPS_A_UNIT = 10;

/**
 * The delay equation of Mackey and Glass (Science 197 (1977)): x' = 0.2 x(t − 17) / (1 + x(t − 17)¹⁰) − 0.1 x, by Heun's
 * steps of a tenth, read every three units of time with noise of a share of its standard deviation, 0.23.
 */
export function mackeyGlass(seed: number, ticks: number, noise: number): Float64Array {
  const random = seededNumbers(seed);
  const normal = gaussians(random);
  const every = 3 * STEPS_A_UNIT;
  const lag = 17 * STEPS_A_UNIT;
  const last = lag + (ticks + SETTLE) * every;
  const x = new Float64Array(last + 1);
  for (let k = 0; k <= lag; k++) x[k] = 1.2 + 0.1 * random();
  const dt = 1 / STEPS_A_UNIT;
  for (let k = lag; k < last; k++) {
    const slope = (value: number, late: number): number => (0.2 * late) / (1 + late ** 10) - 0.1 * value;
    const first = slope(x[k], x[k - lag]);
    x[k + 1] = x[k] + (dt / 2) * (first + slope(x[k] + dt * first, x[k + 1 - lag]));
  }
  return Float64Array.from({ length: ticks }, (_, t) => x[lag + (t + SETTLE) * every] + noise * 0.23 * normal());
}
