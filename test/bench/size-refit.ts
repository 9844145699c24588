/**
 * Measures the constants of trainer/sizing/constants.ts anew and prints them: `npm run build && node test/bench/dist/size-refit.js`,
 * or writes them there with --write. Takes some eight minutes.
 * The shapes are others than those that the bench then holds the foreseen against. Run it on a quiet machine: what others do
 * lengthens even the processor's time, by a fifth where each core is shared.
 */
import { readFileSync, writeFileSync } from 'node:fs';
import { fileURLToPath } from 'node:url';
import { bundleWork, memoryWork, timeWork, type Work } from '@stillwell/trainer';
import { leastRelative } from './least-relative.ts';
import type { SizeShape } from './size-plant.ts';
import { runShape, type SizeRun } from './size-runs.ts';

const SHAPES: readonly SizeShape[] = [
  { signals: 1, ticks: 3000, horizon: 12 },
  { signals: 3, ticks: 6000, horizon: 36 },
  { signals: 6, ticks: 4000, horizon: 24 },
  { signals: 12, ticks: 8000, horizon: 36 },
  { signals: 20, ticks: 6000, horizon: 18 },
  { signals: 1, ticks: 40_000, horizon: 48 },
  { signals: 4, ticks: 30_000, horizon: 72 },
  { signals: 4, ticks: 90_000, horizon: 36 },
  { signals: 10, ticks: 50_000, horizon: 36 },
  { signals: 16, ticks: 90_000, horizon: 24 },
  { signals: 20, ticks: 40_000, horizon: 36 },
  { signals: 1, ticks: 400_000, horizon: 36 },
  { signals: 4, ticks: 200_000, horizon: 48 },
  { signals: 6, ticks: 700_000, horizon: 36 },
  { signals: 8, ticks: 150_000, horizon: 24 },
  { signals: 3, ticks: 300_000, horizon: 24, isParquet: true },
  { signals: 6, ticks: 800_000, horizon: 24, isParquet: true },
  { signals: 8, ticks: 3_000_000, horizon: 36, isParquet: true },
];
const REPEATS = 3;

const words = (name: string, prices: Work): string =>
  `export const ${name}: Work = {\n${Object.entries(prices)
    .map(([key, price]) => `  ${key}: ${Number(price.toPrecision(4))},\n`)
    .join('')}};`;

const runs: SizeRun[] = [];
for (const shape of SHAPES) {
  const run = await runShape(shape, REPEATS);
  runs.push(run);
  process.stderr.write(
    `${JSON.stringify(shape)} ${run.seconds.toFixed(2)} s ${(run.peakBytes / 1e6).toFixed(0)} MB ${run.bundleBytes} probe ${run.foreseen.probe_seconds.toFixed(4)}\n`,
  );
}
const PROBE = Math.min(...runs.map(({ foreseen }) => foreseen.probe_seconds));
const fitted = (name: string, work: (run: SizeRun) => Work, came: (run: SizeRun) => number): string => {
  const { prices, worst } = leastRelative(runs.map(work), runs.map(came));
  process.stderr.write(`${name}: worst ${worst.toFixed(3)} times off\n`);
  return words(name, prices);
};
const blocks = [
  `export const PROBE_SECONDS = ${PROBE.toPrecision(3)};`,
  fitted(
    'SECONDS',
    ({ foreseen }) => timeWork(foreseen.fit.shape),
    ({ seconds }) => seconds,
  ),
  fitted(
    'BYTES',
    ({ foreseen }) => memoryWork(foreseen.fit.shape),
    ({ peakBytes }) => peakBytes,
  ),
  fitted(
    'BUNDLE',
    ({ foreseen }) => bundleWork(foreseen.fit.shape),
    ({ bundleBytes }) => bundleBytes,
  ),
];
if (process.argv.includes('--write')) {
  const file = fileURLToPath(new URL('../../../trainer/sizing/constants.ts', import.meta.url));
  const names = /^export const (\w+)/;
  const text = blocks.reduce(
    (before, block) => {
      const [, name] = names.exec(block) as unknown as [string, string];
      return before.replace(new RegExp(`export const ${name}(: Work)? = [^;]*;`), block);
    },
    readFileSync(file, 'utf8'),
  );
  writeFileSync(file, text);
} else process.stdout.write(`${blocks.join('\n\n')}\n`);
