/**
 * An invented heat substation read once a minute for years: eight signals that swing with the day, wander and drive each other,
 * printed to a hundredth, with a short gap now and then. It streams, so that a history of any length takes no memory.
 */
import { uniforms } from './known-plant.ts';

/** Signals of the plant. */
export const SIGNAL_COUNT = 8;
/** A minute. */
export const TICK_MS = 60_000;
/** 2004-01-01T00:00Z in minutes: ten million of them end in 2023. */
export const FIRST_TICK = Date.UTC(2004, 0, 1) / TICK_MS;
/** Ticks ahead that its site asks for. */
export const HORIZON = 48;

const DAY = 1440;
/** Readings are printed to 1/100. */
const PRINTED = 100;
/** A gap of 2 to 9 ticks of one signal begins every few days. */
const LONGEST_GAP = 9;
const GAP_EVERY = 5000;

/**
 * Name, unit, mean, swing of the day and of the half day, phase in turns, decay a minute, what a unit of the signal before adds
 * a minute, noise of the process, noise of the reading.
 */
const SIGNALS = [
  ['outdoor', 'Cel', 8, 4, 0.8, 0.6, 0.9995, 0, 0.03, 0.05],
  ['supply', 'Cel', 78, -3, 1.2, 0.62, 0.97, -0.02, 0.15, 0.1],
  ['return', 'Cel', 46, -1.5, 0.9, 0.66, 0.985, 0.012, 0.06, 0.08],
  ['flow', 'm3/h', 22, 3, 1.5, 0.3, 0.93, 0.05, 0.3, 0.12],
  ['power', 'kW', 640, 70, 35, 0.31, 0.95, 0.8, 4, 1.5],
  ['pressure', 'bar', 5.6, -0.2, 0.06, 0.3, 0.9, -0.002, 0.02, 0.01],
  ['valve', '%', 48, 9, 4, 0.29, 0.88, -0.9, 0.8, 0.2],
  ['room', 'Cel', 21.4, 0.5, 0.15, 0.55, 0.998, 0.0015, 0.01, 0.04],
] as const;

/** Names of the signals, in order. */
export const SIGNAL_NAMES: readonly string[] = SIGNALS.map(([name]) => name);

/** The site file of the plant. */
export function plantSite(): string {
  const signals = SIGNALS.map(
    ([name, unit]) => `  - { name: ${name}, unit: '${unit}', resolution: 0.01, aggregate: last }`,
  );
  const head = [
    'site: east-substation',
    'class: heat-substation',
    'time_zone: UTC',
    'tick: 1min',
    `horizon: ${HORIZON}`,
  ];
  return `${[...head, 'signals:', ...signals].join('\n')}\n`;
}

/** The plant's readings in order of time, as many as are asked for; the same for the same seed, however they are asked for. */
export class PlantStream {
  readonly #normal: () => number;
  readonly #uniform: () => number;
  readonly #wander = new Float64Array(SIGNAL_COUNT);
  #tick = FIRST_TICK;
  #untilGap: number;
  #gapLeft = 0;
  #gapSignal = 0;

  constructor(seed: number) {
    this.#uniform = uniforms(seed);
    this.#normal = pairedNormals(uniforms(seed + 1));
    this.#untilGap = Math.floor(GAP_EVERY * this.#uniform());
  }

  /** The next readings into `rows` (ticks × 8), row-major; NaN where one is missing. */
  next(rows: Float64Array): void {
    const wander = this.#wander;
    const normal = this.#normal;
    for (let at = 0; at < rows.length; at += SIGNAL_COUNT) {
      const turn = (2 * Math.PI * (this.#tick++ % DAY)) / DAY;
      let before = 0;
      for (let i = 0; i < SIGNAL_COUNT; i++) {
        const [, , mean, day, half, phase, decay, coupling, process, noise] = SIGNALS[i]!;
        const own = wander[i]!;
        wander[i] = decay * own + coupling * before + process * normal();
        before = own;
        const angle = turn - 2 * Math.PI * phase;
        const value = mean + day * Math.cos(angle) + half * Math.cos(2 * angle) + wander[i]! + noise * normal();
        rows[at + i] = Math.round(PRINTED * value) / PRINTED;
      }
      this.#gap(rows, at);
    }
  }

  #gap(rows: Float64Array, at: number): void {
    if (this.#gapLeft > 0) {
      rows[at + this.#gapSignal] = Number.NaN;
      this.#gapLeft--;
    } else if (--this.#untilGap < 0) {
      this.#untilGap = Math.floor(2 * GAP_EVERY * this.#uniform());
      this.#gapLeft = 2 + Math.floor((LONGEST_GAP - 1) * this.#uniform());
      this.#gapSignal = Math.floor(SIGNAL_COUNT * this.#uniform());
    }
  }
}

/** Box and Muller (1958), both of each pair. */
function pairedNormals(uniform: () => number): () => number {
  let kept = Number.NaN;
  return () => {
    if (!Number.isNaN(kept)) {
      const second = kept;
      kept = Number.NaN;
      return second;
    }
    const radius = Math.sqrt(-2 * Math.log(1 - uniform()));
    const angle = 2 * Math.PI * uniform();
    kept = radius * Math.sin(angle);
    return radius * Math.cos(angle);
  };
}
