/**
 * A process of its own for "90,000 windows x 100,000 features, rank 10", so that its memory is its own: windows of the uneven
 * rotor as random features, their running decomposition together with what comes after, and the forecast from the few states
 * that come of it. Prints one JSON object. With a second word: another count of features, 0 for the windows themselves.
 */
import { createFeatures, IncrementalSvd, medianWidth, OwnReadout, predictiveState } from '@stillwell/trainer';
import { rotor, SENSORS } from './rotor.ts';

const LEARNED = 90_000;
const JUDGED = 10_000;
const WINDOW = 64;
const STEPS = [1, 2, 4, 8, 16, 25] as const;
const HORIZON = 25;
const RANK = 10;
const SAMPLE = 1000;
const INPUTS = WINDOW * SENSORS;
const OUTPUTS = STEPS.length * SENSORS;

/** Past features of the window whose first reading stands at tick `from`, less their mean over a sample. */
class Past {
  readonly length: number;
  readonly energy: number;
  readonly #readings: Float32Array;
  readonly #map: ReturnType<typeof createFeatures> | null;
  readonly #mean: Float32Array;

  constructor(readings: Float32Array, features: number) {
    this.#readings = readings;
    const sample = new Float32Array(SAMPLE * INPUTS);
    const every = Math.floor((LEARNED - WINDOW) / SAMPLE);
    for (let k = 0; k < SAMPLE; k++) sample.set(this.#window(k * every), k * INPUTS);
    const width = medianWidth(sample, SAMPLE, 1);
    this.#map = features === 0 ? null : createFeatures({ inputs: INPUTS, outputs: features, width, seed: 1 });
    this.length = this.#map?.outputs ?? INPUTS;
    this.#mean = new Float32Array(this.length);
    const one = new Float32Array(this.length);
    const mean = new Float64Array(this.length);
    let square = 0;
    for (let k = 0; k < SAMPLE; k++) {
      this.write(k * every, one);
      for (let j = 0; j < one.length; j++) {
        mean[j]! += one[j]! / SAMPLE;
        square += one[j]! ** 2 / SAMPLE;
      }
    }
    this.energy = square - mean.reduce((sum, value) => sum + value * value, 0);
    this.#mean.set(mean);
  }

  #window(from: number): Float32Array {
    return this.#readings.subarray(from * SENSORS, from * SENSORS + INPUTS);
  }

  write(from: number, out: Float32Array): void {
    if (this.#map === null) out.set(this.#window(from));
    else this.#map.apply(this.#window(from), out);
    for (let j = 0; j < this.length; j++) out[j]! -= this.#mean[j]!;
  }
}

function main(): void {
  const features = Number(process.argv[2] ?? 100_000);
  const started = performance.now();
  const readings = rotor(LEARNED + JUDGED + WINDOW + HORIZON, 5);
  const past = new Past(readings, features);
  const columns = past.length + OUTPUTS;
  // What comes weighs as much as the past.
  const weight = Math.sqrt(past.energy / (OUTPUTS * 2));
  const svd = new IncrementalSvd({ columns, rank: RANK });
  const row = new Float32Array(columns);
  const phi = row.subarray(0, past.length);
  let featureSeconds = (performance.now() - started) / 1000;
  for (let t = 0; t < LEARNED; t++) {
    const before = performance.now();
    past.write(t, phi);
    featureSeconds += (performance.now() - before) / 1000;
    STEPS.forEach((step, s) => {
      const at = (t + WINDOW - 1 + step) * SENSORS;
      for (let i = 0; i < SENSORS; i++) row[past.length + s * SENSORS + i] = weight * readings[at + i]!;
    });
    svd.push(row);
  }
  const factors = svd.factors();
  const span = { from: 0, to: past.length };
  const layout = { past: span, next: span, future: { from: past.length, to: columns }, outputs: SENSORS };
  const { order, stateMap } = predictiveState(factors, layout, RANK);
  const states = new States(readings, past, stateMap, order);
  const readout = regressed(states);
  const seconds = (performance.now() - started) / 1000;
  const errors = judged(states, readout);
  const { orthogonality } = factors;
  const discarded = factors.discarded / factors.energy;
  process.stdout.write(
    `${JSON.stringify({ seconds, featureSeconds, columns, order, discarded, orthogonality, ...errors })}\n`,
  );
}

/** The state of a window, its newest readings, and those that come after. */
class States {
  readonly x: Float64Array;
  readonly newest = new Float64Array(SENSORS);
  /** (OUTPUTS). */
  readonly future = new Float64Array(OUTPUTS);
  readonly #phi: Float32Array;
  readonly #readings: Float32Array;
  readonly #past: Past;
  readonly #map: Float64Array;

  constructor(readings: Float32Array, past: Past, map: Float64Array, order: number) {
    this.x = new Float64Array(order);
    this.#phi = new Float32Array(past.length);
    this.#readings = readings;
    this.#past = past;
    this.#map = map;
  }

  goTo(t: number): void {
    const phi = this.#phi;
    const map = this.#map;
    this.#past.write(t, phi);
    for (let d = 0, at = 0; d < this.x.length; d++) {
      let sum = 0;
      for (let j = 0; j < phi.length; j++, at++) sum += map[at]! * phi[j]!;
      this.x[d] = sum;
    }
    const newest = (t + WINDOW - 1) * SENSORS;
    for (let i = 0; i < SENSORS; i++) {
      this.newest[i] = this.#readings[newest + i]!;
      for (const [s, step] of STEPS.entries())
        this.future[s * SENSORS + i] = this.#readings[newest + step * SENSORS + i]!;
    }
  }
}

type Readout = ReturnType<OwnReadout['solve']>;

/** What comes, by state and newest reading: every third window learned from. */
function regressed(states: States): Readout {
  const regression = new OwnReadout(states.x.length, SENSORS, STEPS.length);
  for (let t = 0; t < LEARNED - HORIZON; t += 3) {
    states.goTo(t);
    regression.add(states.x, states.newest, states.future);
  }
  return regression.solve();
}

/** Sums of squared errors over all steps, on windows after those learned from: ours, the newest reading held, the mean. */
function judged(states: States, { forecastMap, own }: Readout): { ours: number; held: number; mean: number } {
  const sums = { ours: 0, held: 0, mean: 0 };
  for (let t = LEARNED + HORIZON; t < LEARNED + JUDGED; t += 5) {
    states.goTo(t);
    for (let k = 0; k < OUTPUTS; k++) {
      const came = states.future[k]!;
      const newest = states.newest[k % SENSORS]!;
      let forecast = own[k]! * newest;
      for (let d = 0; d < states.x.length; d++) forecast += forecastMap[k * states.x.length + d]! * states.x[d]!;
      sums.ours += (came - forecast) ** 2;
      sums.held += (came - newest) ** 2;
      sums.mean += came ** 2;
    }
  }
  return sums;
}

main();
