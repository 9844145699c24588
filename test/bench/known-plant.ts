/**
 * A plant whose best forecast is known exactly: each of three signals is a first-order process read through noise, so the
 * steady-state Kalman filter is a single number (Anderson & Moore, Optimal Filtering, 1979, section 4.4).
 */
import { parseSite, type Site } from '@stillwell/protocol';

/** What a fit takes, and the error no forecast can beat but by chance. */
export interface KnownPlant {
  readonly input: {
    readonly series: {
      readonly tickMs: number;
      readonly firstTick: number;
      readonly ticks: number;
      readonly names: readonly string[];
      readonly signalCount: number;
      readonly values: readonly Float64Array[];
      readonly digest: Uint8Array;
    };
    readonly site: Site;
    readonly survey: unknown;
    readonly lattices: readonly { readonly step: number; readonly offset: number }[];
  };
  /** Mean squared error of the exact filter over signals and steps, origins from the tick before `from`. */
  readonly optimum: (from: number) => number;
}

/** Steps forecast. */
export const HORIZON = 24;
const STEP = 1e-6;
/** Decay, noise of the process, noise of the reading. */
const PROCESSES = [
  [0.98, 0.3, 0.8],
  [0.9, 0.6, 0.4],
  [0.8, 1, 1],
] as const;

/** Seeded; ticks of 20 s, so that no day is within reach. */
export function knownPlant(ticks: number, seed: number): KnownPlant {
  const normal = normals(seed);
  const values = PROCESSES.map(([a, q, r]) => {
    let x = 0;
    return Float64Array.from({ length: ticks }, () => {
      x = a * x + q * normal();
      return printed(x + r * normal());
    });
  });
  return {
    input: historyOf(values, []),
    optimum: (from) =>
      PROCESSES.reduce((sum, process, i) => sum + exactError(process, values[i]!, from), 0) / PROCESSES.length,
  };
}

/** A history of the plant with its site: signals, then inputs, printed to a millionth. */
export function historyOf(signals: readonly Float64Array[], inputs: readonly Float64Array[]): KnownPlant['input'] {
  const values = [...signals, ...inputs];
  const names = values.map((_, i) => (i < signals.length ? `signal-${i}` : `input-${i - signals.length}`));
  const channel = (name: string): readonly string[] => [`  - name: ${name}`, "    unit: '1'"];
  const text = [
    'site: known',
    'class: plant',
    'time_zone: UTC',
    'tick: 20s',
    `horizon: ${HORIZON}`,
    'signals:',
    ...names.slice(0, signals.length).flatMap(channel),
    ...(inputs.length > 0 ? ['inputs:', ...names.slice(signals.length).flatMap(channel)] : []),
  ];
  return {
    series: {
      tickMs: 20_000,
      firstTick: 85_000_000,
      ticks: values[0]!.length,
      names,
      signalCount: signals.length,
      values,
      digest: new Uint8Array(32),
    },
    site: parseSite(`${text.join('\n')}\n`, 'bench site'),
    survey: {},
    lattices: names.map(() => ({ step: STEP, offset: 0 })),
  };
}

/** Rounded to what is printed. */
export function printed(value: number): number {
  return STEP * Math.round(value / STEP);
}

function exactError([a, q, r]: readonly [number, number, number], y: Float64Array, from: number): number {
  let variance = 1;
  let gain = 0;
  for (let k = 0; k < 2000; k++) {
    gain = variance / (variance + r * r);
    variance = a * a * (1 - gain) * variance + q * q;
  }
  let x = 0;
  let sum = 0;
  let count = 0;
  for (let t = 0; t + HORIZON < y.length; t++) {
    x = a * x + gain * (y[t]! - a * x);
    if (t < from - 1) continue;
    let forecast = x;
    for (let h = 1; h <= HORIZON; h++) {
      forecast *= a;
      sum += (y[t + h]! - forecast) ** 2;
      count++;
    }
  }
  return sum / count;
}

/** Box and Muller (1958) on a 32-bit shift-register sequence (Marsaglia, 2003). */
export function normals(seed: number): () => number {
  const uniform = uniforms(seed);
  return () => Math.sqrt(-2 * Math.log(1 - uniform())) * Math.cos(2 * Math.PI * uniform());
}

/** Uniform numbers in [0, 1). */
export function uniforms(seed: number): () => number {
  let word = seed | 0 || 1;
  return () => {
    word ^= word << 13;
    word ^= word >>> 17;
    word ^= word << 5;
    return (word >>> 0) / 2 ** 32;
  };
}
