/** Histories from a seed, for tests of what learns from them: a daily swing, a slow wander, noise; and the site around them. */
import { createHash } from 'node:crypto';
import { parseSite, type Site } from '../../protocol/index.ts';
import type { Series } from '../../trainer/history/series.ts';
import { gaussians } from './gaussian.ts';
import { recurrence } from './sample-bundle.ts';

const HOUR_MS = 3_600_000;

/** A site with hourly ticks. */
export function hourlySite(names: readonly string[], horizon: number, inputs: readonly string[] = []): Site {
  const list = (kind: string, of: readonly string[]): string[] =>
    of.length === 0 ? [] : [`${kind}:`, ...of.flatMap((name) => [`  - name: ${name}`, "    unit: '1'"])];
  const text = [
    'site: test-bench',
    'class: bench',
    'time_zone: UTC',
    'tick: 1h',
    `horizon: ${horizon}`,
    ...list('signals', names),
    ...list('inputs', inputs),
  ];
  return parseSite(`${text.join('\n')}\n`, 'site.yaml');
}

/** A series of given values, hourly from 2024. */
export function seriesOf(
  names: readonly string[],
  values: readonly Float64Array[],
  signalCount = values.length,
): Series {
  const hash = createHash('sha256');
  for (const one of values) hash.update(new Uint8Array(one.buffer, one.byteOffset, one.byteLength));
  return {
    tickMs: HOUR_MS,
    firstTick: Date.UTC(2024, 0, 1) / HOUR_MS,
    ticks: values[0]!.length,
    names,
    signalCount,
    values,
    digest: new Uint8Array(hash.digest()),
  };
}

/** Channels on a lattice of a hundredth: swing of a day, autoregressive wander shared by all, noise of each. */
export function wanderingDays(channels: number, ticks: number, seed: number): Float64Array[] {
  const next = recurrence(seed);
  const normal = gaussians(() => next() / 2 ** 32);
  const values = Array.from({ length: channels }, () => new Float64Array(ticks));
  let wander = 0;
  for (let t = 0; t < ticks; t++) {
    wander = 0.97 * wander + 0.25 * normal();
    values.forEach((y, c) => {
      const swing = (2 - 0.3 * c) * Math.sin((2 * Math.PI * (t + 3 * c)) / 24);
      y[t] = Math.round(100 * (20 + 5 * c + swing + wander + 0.3 * normal())) / 100;
    });
  }
  return values;
}
