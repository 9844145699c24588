/**
 * How deviations from the simulation and unplanned inputs go on: a sum of decays ρ_j^h whose coefficients are linear in the
 * latest value and its means over several times. All steps are fitted at once by ridge regression, so one small matrix serves
 * every horizon, and whatever was learned fades.
 */
import { cholesky, solveCholesky } from '../linalg/cholesky.ts';

/** Time constants of the fading and of the means, as decays a tick. */
export interface FadingTimes {
  /** (J) */
  readonly fadeDecays: Float64Array;
  /** (K) */
  readonly meanDecays: Float64Array;
}

const MOST_FADES = 6;
const SHORTEST_FADE = 2;
const FADE_STEP = 3;
const MEAN_TICKS = [2, 8, 32] as const;
/** Of the mean diagonal of the normal matrix. */
const PENALTY = 0.01;
/** Origins and steps are thinned to about this many pairs: there are two dozen coefficients. */
const MOST_PAIRS = 200_000;
/** An input is led on rather than held only for this share of the squared error. */
const LEAD_GAIN = 0.02;

/**
 * Times that suit a horizon and a length of record.
 *
 * shapes  as FadingTimes
 * units   ticks
 * throws  nothing
 * source  own choice
 * cost    trivial
 */
export function fadingTimes(horizon: number, ticks: number): FadingTimes {
  const fades: number[] = [];
  for (
    let tau = SHORTEST_FADE;
    fades.length < MOST_FADES && (tau <= 2 * horizon || fades.length < 2);
    tau *= FADE_STEP
  ) {
    fades.push(Math.exp(-1 / tau));
  }
  const means = MEAN_TICKS.filter((tau, k) => k === 0 || tau <= ticks / 20).map((tau) => Math.exp(-1 / tau));
  return { fadeDecays: Float64Array.from(fades), meanDecays: Float64Array.from(means) };
}

/**
 * Coefficients of a deviation: e(t+h) ≈ Σ_j c_j ρ_j^h, c = G [e; means of e].
 *
 * shapes  deviation (ticks), NaN where there was no reading; result (J × (1 + K))
 * units   standardised
 * throws  nothing
 * source  ridge regression with weight 1/h for step h, as in the linear kind
 * cost    O(pairs (J (1 + K))²)
 */
export function fitDeviation(deviation: Float64Array, times: FadingTimes, horizon: number): Float64Array {
  const K = times.meanDecays.length;
  const cues = (means: Float64Array, value: number, out: Float64Array): void => {
    out[0] = value;
    out.set(means, 1);
  };
  return fitFading(
    deviation,
    times,
    horizon,
    1 + K,
    cues,
    (power) => power,
    (value, _now) => value,
  ).gain;
}

/**
 * Coefficients of an input without a plan: u(t+k) ≈ u(t) + Σ_j c_j (1 − ρ_j^k), c = G [mean of the record − u(t); means of u − u(t)];
 * zeros, which hold the last value, unless leading on pays.
 *
 * shapes  input (ticks); result (J × (1 + K))
 * units   standardised
 * throws  nothing
 * source  as fitDeviation
 * cost    as fitDeviation
 */
export function fitLead(input: Float64Array, times: FadingTimes, horizon: number): Float64Array {
  const K = times.meanDecays.length;
  const cues = (means: Float64Array, value: number, out: Float64Array): void => {
    out[0] = -value;
    for (let k = 0; k < K; k++) out[1 + k] = means[k] - value;
  };
  const fitted = fitFading(
    input,
    times,
    horizon,
    1 + K,
    cues,
    (power) => 1 - power,
    (value, now) => value - now,
  );
  return fitted.gainShare > LEAD_GAIN ? fitted.gain : fitted.gain.fill(0);
}

interface Fitted {
  readonly gain: Float64Array;
  /** Share of the targets' weighted square that the fit explains. */
  readonly gainShare: number;
}

function fitFading(
  series: Float64Array,
  { fadeDecays, meanDecays }: FadingTimes,
  horizon: number,
  cueCount: number,
  writeCues: (means: Float64Array, value: number, out: Float64Array) => void,
  curve: (power: number) => number,
  target: (value: number, now: number) => number,
): Fitted {
  const J = fadeDecays.length;
  const p = J * cueCount;
  const gram = new Float64Array(p * p);
  const right = new Float64Array(p);
  const means = new Float64Array(meanDecays.length);
  const cues = new Float64Array(cueCount);
  const row = new Float64Array(p);
  const steps = thinnedSteps(horizon);
  const every = Math.max(1, Math.floor((series.length * steps.length) / MOST_PAIRS));
  let energy = 0;
  let isStarted = false;
  for (let t = 0; t < series.length; t++) {
    const value = series[t];
    if (Number.isNaN(value)) continue;
    for (let k = 0; k < means.length; k++) {
      means[k] = isStarted ? meanDecays[k] * means[k] + (1 - meanDecays[k]) * value : value;
    }
    isStarted = true;
    if (t % every !== 0) continue;
    writeCues(means, value, cues);
    for (const { h, weight } of steps) {
      const ahead = series[t + h];
      if (ahead === undefined || Number.isNaN(ahead)) continue;
      const aim = target(ahead, value);
      for (let j = 0; j < J; j++) {
        const size = curve(fadeDecays[j] ** h);
        for (let k = 0; k < cueCount; k++) row[j * cueCount + k] = size * cues[k];
      }
      energy += weight * aim * aim;
      for (let a = 0; a < p; a++) {
        const weighted = weight * row[a];
        right[a] += weighted * aim;
        for (let b = 0; b <= a; b++) gram[a * p + b] += weighted * row[b];
      }
    }
  }
  return solved(gram, right, p, energy);
}

function solved(gram: Float64Array, right: Float64Array, p: number, energy: number): Fitted {
  let trace = 0;
  for (let a = 0; a < p; a++) trace += gram[a * p + a];
  if (!(trace > 0)) return { gain: new Float64Array(p), gainShare: 0 };
  const damped = gram.slice();
  for (let a = 0; a < p; a++) damped[a * p + a] += (PENALTY * trace) / p;
  const gain = right.slice();
  solveCholesky(cholesky(damped, p), p, gain, 1);
  let explained = 0;
  for (let a = 0; a < p; a++) {
    explained += 2 * gain[a] * right[a] - gain[a] * gain[a] * gram[a * p + a];
    for (let b = 0; b < a; b++) explained -= 2 * gain[a] * gain[b] * gram[a * p + b];
  }
  return { gain, gainShare: energy > 0 ? explained / energy : 0 };
}

/** Every step to 8, then steps a quarter further each, and the last; each weighs 1/h for every step it stands for. */
function thinnedSteps(horizon: number): { readonly h: number; readonly weight: number }[] {
  const steps: number[] = [];
  for (let h = 1; h < horizon; h = h < 8 ? h + 1 : Math.ceil(h * 1.25)) steps.push(h);
  steps.push(horizon);
  return steps.map((h, k) => ({ h, weight: (h - (k === 0 ? 0 : steps[k - 1])) / h }));
}
