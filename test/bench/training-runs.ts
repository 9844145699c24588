/** The real commands on a history of the plant, in child processes: fit, then seal with a test key. */
import { mkdtempSync, rmSync, writeFileSync } from 'node:fs';
import { tmpdir } from 'node:os';
import { join } from 'node:path';
import { createKeyPair, formatKey } from '@stillwell/protocol';
import type { BenchOptions, Row } from './harness.ts';
import { plantSite } from './training-plant.ts';
import { FailedRun, measure, type Ran, STILLWELL } from './training-process.ts';

/** A folder with the plant's site file and an author key. */
export interface Workshop {
  readonly folder: string;
  readonly site: string;
  readonly key: string;
}

/** What a fit or refit said under --json; of a program's own output, so of its present shape. */
export interface SaidOfFit {
  readonly bytes: number;
  readonly mean_skill: number;
  readonly chosen: {
    readonly kind: string;
    readonly bank: string;
    readonly periodTicks: number;
    readonly order: number;
  };
  readonly timings_ms: Readonly<Record<string, number>>;
  readonly warnings: readonly string[];
}

/** A history fitted and sealed. */
export interface Sealed {
  readonly seconds: number;
  readonly cpuSeconds: number;
  /** Of the fit, which is the larger of the two. */
  readonly peakMb: number;
  readonly fitted: Ran;
  readonly said: SaidOfFit;
  /** Folder of the fit and its bundle. */
  readonly out: string;
  readonly bundle: string;
}

/** Rows that need a folder of files, deleted after; a command that fails ends them with a line that says so. */
export async function* inWorkshop(
  { note }: BenchOptions,
  rows: (workshop: Workshop) => AsyncIterable<Row>,
): AsyncIterable<Row> {
  const folder = mkdtempSync(join(tmpdir(), 'stillwell-bench-'));
  const workshop = { folder, site: join(folder, 'site.yaml'), key: join(folder, 'author.key') };
  // Hundreds of megabytes must not stay behind where somebody stops a long bench.
  const clear = (): void => rmSync(folder, { recursive: true, force: true });
  const stop = (): void => process.exit(130);
  process.once('exit', clear).once('SIGINT', stop).once('SIGTERM', stop);
  try {
    writeFileSync(workshop.site, plantSite());
    writeFileSync(workshop.key, formatKey(createKeyPair(new Uint8Array(32).fill(7))), { mode: 0o600 });
    yield* rows(workshop);
  } catch (error) {
    if (!(error instanceof FailedRun)) throw error;
    note(error.message);
  } finally {
    process.off('exit', clear).off('SIGINT', stop).off('SIGTERM', stop);
    clear();
  }
}

/** Words of a fit. */
export function fitCommand({ site }: Workshop, history: readonly string[], out: string): readonly string[] {
  return ['fit', '--site', site, '--history', ...history, '--out', out, '--json'];
}

/**
 * From the files of a history to a sealed bundle.
 *
 * throws  FailedRun where a command fails
 */
export async function fitAndSeal(workshop: Workshop, history: readonly string[], name: string): Promise<Sealed> {
  const out = join(workshop.folder, name);
  rmSync(out, { recursive: true, force: true });
  const fitted = await measure([STILLWELL, ...fitCommand(workshop, history, out)]);
  const bundle = join(out, 'bundle.swb');
  const sealed = await seal(workshop, out, bundle);
  return {
    seconds: fitted.seconds + sealed.seconds,
    cpuSeconds: fitted.cpuSeconds + sealed.cpuSeconds,
    peakMb: Math.max(fitted.peakMb, sealed.peakMb),
    fitted,
    said: JSON.parse(fitted.stdout) as SaidOfFit,
    out,
    bundle,
  };
}

function seal({ key }: Workshop, out: string, bundle: string): Promise<Ran> {
  const words = ['--candidate', join(out, 'candidate.swc'), '--key', key, '--out', bundle];
  return measure([STILLWELL, 'seal', ...words, '--override', 'a bench, whatever its skill']);
}

/** Time of a fit by step and the most memory held meanwhile, in a line. What is written after the steps counts to the start. */
export function stepsOf({ seconds, cpuSeconds, peakMb, fitted, said }: Sealed): string {
  const laps = Object.entries(said.timings_ms);
  const known = laps.reduce((sum, [, ms]) => sum + ms / 1000, 0);
  // Steps follow each other and the last one ends as the program does.
  let from = fitted.seconds - known;
  const before = `start and reading ${step(fitted, 0, from)}`;
  const steps = laps.map(([name, ms]) => {
    const to = from + ms / 1000;
    const text = `${name} ${step(fitted, from, to)}`;
    from = to;
    return text;
  });
  const whole = `${seconds.toFixed(2)} s, processor ${cpuSeconds.toFixed(2)} s, peak ${peakMb.toFixed(0)} MB`;
  return `${whole}: ${[before, ...steps].join('; ')}; sealing ${(seconds - fitted.seconds).toFixed(2)} s`;
}

function step({ held }: Ran, from: number, to: number): string {
  const within = held.filter(([at]) => at >= from && at < to).map(([, megabytes]) => megabytes);
  const most = within.length > 0 ? ` ${Math.max(...within).toFixed(0)} MB` : '';
  return `${(to - from).toFixed(2)} s${most}`;
}
