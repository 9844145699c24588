/**
 * A plant whose answer to its input is known exactly: gain, lag and dead time in series, the usual first model of a process
 * (Seborg, Edgar & Mellichamp, Process Dynamics and Control, step response of a first-order-plus-time-delay model:
 * y = K (1 − exp(−(t − θ)/τ)) for t > θ, from memory), under a wandering disturbance and read through noise. The input is
 * moved by hand at random moments, so that nothing but a plan tells of it ahead.
 */
import { parseSite, type Site } from '@stillwell/protocol';
import type { KnownPlant } from './known-plant.ts';

export const GAIN = 2;
export const LAG = 8;
export const DEAD_TIME = 3;
export const HORIZON = 30;
const WANDER = 0.95;
const WANDER_STEP = 0.1;
const NOISE = 0.05;
const STEP = 0.001;

/** Answer to a step of one, `h` ticks after it was made; a tick's value acts from the tick on. */
export const stepResponse = (h: number): number => (h > DEAD_TIME ? GAIN * (1 - Math.exp(-(h - DEAD_TIME) / LAG)) : 0);

/**
 * Mean squared error, in units², that no forecast can beat even when it knows the input ahead and the disturbance now:
 * over steps 1 to the horizon.
 */
export const leastError = (): number => {
  let sum = 0;
  for (let h = 1; h <= HORIZON; h++)
    sum += (WANDER_STEP ** 2 * (1 - WANDER ** (2 * h))) / (1 - WANDER ** 2) + NOISE ** 2;
  return sum / HORIZON;
};

/** The site: one signal, one input with a plan. */
export const plannedSite = (planTopic: string | null = 'plan/valve'): Site =>
  parseSite(
    [
      'site: heater',
      'class: test',
      'time_zone: UTC',
      'tick: 20s',
      `horizon: ${HORIZON}`,
      'signals:',
      '  - name: outlet',
      '    topic: plant/outlet',
      '    payload: { json: /v, time: /t }',
      '    unit: Cel',
      'inputs:',
      '  - name: valve',
      '    topic: plant/valve',
      '    payload: { json: /v, time: /t }',
      "    unit: '1'",
      '    range: [0, 10]',
      ...(planTopic === null ? [] : [`    plan_topic: ${planTopic}`]),
      '',
    ].join('\n'),
    'site.yaml',
  );

/** A history; `valve` null: moved at random, otherwise its value at each tick. */
export const plannedHistory = (
  ticks: number,
  seed: number,
  valve: ((t: number) => number) | null = null,
): KnownPlant['input'] => {
  const uniform = uniforms(seed);
  const normal = (): number => Math.sqrt(-2 * Math.log(1 - uniform())) * Math.cos(2 * Math.PI * uniform());
  const u = new Float64Array(ticks);
  const y = new Float64Array(ticks);
  let level = 0;
  let lagged = 0;
  let wander = 0;
  const keep = Math.exp(-1 / LAG);
  for (let t = 0; t < ticks; t++) {
    if (uniform() < 1 / 20) level = Math.round(8 * uniform()) / 2;
    u[t] = valve === null ? level : valve(t);
    lagged = keep * lagged + (1 - keep) * GAIN * (t >= DEAD_TIME ? u[t - DEAD_TIME]! : 0);
    wander = WANDER * wander + WANDER_STEP * normal();
    y[t] = STEP * Math.round((10 + lagged + wander + NOISE * normal()) / STEP);
  }
  return {
    series: {
      tickMs: 20_000,
      firstTick: 85_000_000,
      ticks,
      names: ['outlet', 'valve'],
      signalCount: 1,
      values: [y, u],
      digest: new Uint8Array(32),
    },
    site: plannedSite(),
    survey: {},
    lattices: [
      { step: STEP, offset: 0 },
      { step: 0.5, offset: 0 },
    ],
  };
};

/** Integers by a linear recurrence (Numerical Recipes, "quick and dirty" generators), as numbers below one. */
const uniforms = (seed: number): (() => number) => {
  let word = seed >>> 0;
  return () => {
    word = (Math.imul(word, 1_664_525) + 1_013_904_223) >>> 0;
    return word / 2 ** 32;
  };
};
