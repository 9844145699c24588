/**
 * A plant of four coupled states, three noisy signals and one input that is measured exactly: a first-order process of its own, of
 * which nobody knows the future. The best forecast is that of the steady-state Kalman filter over plant and input together
 * (Anderson & Moore, Optimal Filtering, 1979, section 4.4).
 */
import { HORIZON, historyOf, type KnownPlant, normals, printed } from './known-plant.ts';

type Matrix = readonly (readonly number[])[];

/** Four states and the input: two that decay, two that swing, each pushed by the input. */
const TRANSITION: Matrix = [
  [0.96, 0.02, 0, 0, 0.1],
  [0.03, 0.9, 0.05, 0, 0.3],
  [0, 0, 0.8789, -0.2719, 0.2],
  [0, 0, 0.2719, 0.8789, 0],
  [0, 0, 0, 0, 0.95],
];
/** Three signals, and the input as it is. */
const OBSERVATION: Matrix = [
  [1, 0, 0.5, 0, 0],
  [0, 1, 0, 0.5, 0],
  [0.5, 0.5, 0, 1, 0],
  [0, 0, 0, 0, 1],
];
const STATE_NOISE = [0.1, 0.2, 0.3, 0.2, 0.3] as const;
const READING_NOISE = [0.4, 0.3, 0.5, 0] as const;
const SIGNALS = 3;

/** Seeded; ticks of 20 s, so that no day is within reach. */
export function coupledPlant(ticks: number, seed: number): KnownPlant {
  const normal = normals(seed);
  let state: readonly number[] = STATE_NOISE.map(() => 0);
  const readings = OBSERVATION.map(() => new Float64Array(ticks));
  for (let t = 0; t < ticks; t++) {
    state = apply(TRANSITION, state).map((x, k) => x + STATE_NOISE[k]! * normal());
    apply(OBSERVATION, state).forEach((y, i) => {
      readings[i]![t] = printed(y + READING_NOISE[i]! * normal());
    });
  }
  return {
    input: historyOf(readings.slice(0, SIGNALS), readings.slice(SIGNALS)),
    optimum: (from) => exactError(readings, from),
  };
}

function exactError(readings: readonly Float64Array[], from: number): number {
  const gain = steadyGain();
  let x: readonly number[] = STATE_NOISE.map(() => 0);
  let sum = 0;
  let count = 0;
  for (let t = 0; t + HORIZON < readings[0]!.length; t++) {
    const predicted = apply(TRANSITION, x);
    const expected = apply(OBSERVATION, predicted);
    const innovation = expected.map((y, i) => readings[i]![t]! - y);
    const moved = apply(gain, innovation);
    x = predicted.map((value, k) => value + moved[k]!);
    if (t < from - 1) continue;
    let ahead = x;
    for (let h = 1; h <= HORIZON; h++) {
      ahead = apply(TRANSITION, ahead);
      const forecast = apply(OBSERVATION, ahead);
      for (let i = 0; i < SIGNALS; i++) sum += (readings[i]![t + h]! - forecast[i]!) ** 2;
      count += SIGNALS;
    }
  }
  return sum / count;
}

/** (5 × 4), from the Riccati recursion run until it stands still. */
function steadyGain(): Matrix {
  const F = TRANSITION;
  const C = OBSERVATION;
  let P: Matrix = F.map((_, i) => F.map((_, j) => (i === j ? 1 : 0)));
  let gain: Matrix = [];
  for (let k = 0; k < 3000; k++) {
    const PC = times(P, transposed(C));
    const S = plusSquares(times(C, PC), READING_NOISE);
    gain = times(PC, inverse(S));
    const filtered = minus(P, times(gain, transposed(PC)));
    const next = plusSquares(times(times(F, filtered), transposed(F)), STATE_NOISE);
    // What rounding adds on one side of the diagonal alone would grow without end.
    P = next.map((row, i) => row.map((value, j) => (value + next[j]![i]!) / 2));
  }
  return gain;
}

function apply(a: Matrix, x: readonly number[]): number[] {
  return a.map((row) => row.reduce((sum, value, k) => sum + value * x[k]!, 0));
}

function times(a: Matrix, b: Matrix): Matrix {
  const columns = transposed(b);
  return a.map((row) => apply(columns, row));
}

function transposed(a: Matrix): Matrix {
  return a[0]!.map((_, j) => a.map((row) => row[j]!));
}

function minus(a: Matrix, b: Matrix): Matrix {
  return a.map((row, i) => row.map((value, j) => value - b[i]![j]!));
}

/** Adds squares of `deviations` to the diagonal. */
function plusSquares(a: Matrix, deviations: readonly number[]): Matrix {
  return a.map((row, i) => row.map((value, j) => (i === j ? value + deviations[i]! ** 2 : value)));
}

/** Gauss and Jordan; positive definite here, so that no pivot is small. */
function inverse(a: Matrix): Matrix {
  const n = a.length;
  const work = a.map((row, i) => [...row, ...row.map((_, j) => (i === j ? 1 : 0))]);
  for (let k = 0; k < n; k++) {
    const pivot = work[k]![k]!;
    work[k] = work[k]!.map((value) => value / pivot);
    for (let i = 0; i < n; i++) {
      const factor = work[i]![k]!;
      if (i !== k) work[i] = work[i]!.map((value, j) => value - factor * work[k]![j]!);
    }
  }
  return work.map((row) => row.slice(n));
}
