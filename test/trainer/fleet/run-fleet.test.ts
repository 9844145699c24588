/** Many sites on worker threads. The workers are those of the last build, which `npm test` makes first. */
import { createHash } from 'node:crypto';
import { cpSync, mkdtempSync, readdirSync, readFileSync, rmSync, writeFileSync } from 'node:fs';
import { tmpdir } from 'node:os';
import { join } from 'node:path';
import { afterAll, beforeAll, describe, expect, it, onTestFinished } from 'vitest';
import { FIT_DEFAULTS } from '../../../trainer/fit-options.ts';
import { fitSite } from '../../../trainer/fit-site.ts';
import { fleetJson } from '../../../trainer/fleet/fleet-json.ts';
import type { FleetProgress } from '../../../trainer/fleet/fleet-progress.ts';
import { type FleetResult, type FleetWork, runFleet } from '../../../trainer/fleet/run-fleet.ts';
import { readSite } from '../../../trainer/site-file.ts';
import { writeFleet } from '../../support/fleet.ts';
import { testFolder } from '../../support/folder.ts';

const SITES = ['north', 'south', 'west'];
const QUIET: FleetProgress = { step: () => {}, done: () => {}, end: () => {} };
/** One kind, which is quick; what is tested is the same for all. */
const { progress: _, ...OPTIONS } = { ...FIT_DEFAULTS, kind: 'linear' as const };

function worksOf(fleet: string, out: string, seed = 1, names: readonly string[] = SITES): FleetWork[] {
  return names.map((label, index) => ({
    label,
    problem: null,
    weight: 1 + index,
    task: {
      index,
      isFresh: false,
      job: {
        site: readSite(join(fleet, label, 'site.yaml')),
        history: [join(fleet, label, 'log.csv')],
        out: join(out, label),
        zone: null,
        span: {},
        halfLifeTicks: null,
        options: { ...OPTIONS, seed },
      },
    },
  }));
}

function run(works: readonly FleetWork[], threads: number) {
  return runFleet(works, { threads, progress: QUIET, signal: new AbortController().signal });
}

function digests(folder: string): Record<string, string> {
  const files = readdirSync(folder, { recursive: true, withFileTypes: true }).filter((entry) => entry.isFile());
  return Object.fromEntries(
    files
      .map((entry) => join(entry.parentPath, entry.name))
      .sort()
      .map((path) => [path.slice(folder.length), createHash('sha256').update(readFileSync(path)).digest('hex')]),
  );
}

/** The fleet, and what one thread made of it: for all tests here, which copy what they change. */
const fleet = mkdtempSync(join(tmpdir(), 'fleet-'));
const fitted = join(fleet, 'fitted');
let first: readonly (FleetResult | null)[];
beforeAll(async () => {
  writeFleet(fleet, SITES);
  first = (await run(worksOf(fleet, fitted), 1)).results;
});
afterAll(() => rmSync(fleet, { recursive: true }));

describe('the same bytes', () => {
  it('with one, two and three threads, and as a single fit gives', async () => {
    const said = (results: readonly (FleetResult | null)[]): unknown =>
      fleetJson(results.filter((one) => one !== null));
    const seen: unknown[] = [[digests(fitted), said(first)]];
    for (const threads of [2, 3]) {
      const out = testFolder();
      const { results } = await run(worksOf(fleet, out), threads);
      seen.push([digests(out), said(results)]);
    }
    expect(Object.keys((seen[0] as [object])[0])).toHaveLength(18);
    expect(seen[1]).toEqual(seen[0]);
    expect(seen[2]).toEqual(seen[0]);
    const job = worksOf(fleet, '/out')[1]!.task!.job;
    const alone = await fitSite(job, { reading: { update: () => {}, end: () => {} }, step: () => {}, end: () => {} });
    for (const { path, bytes } of alone.files)
      expect((seen[0] as [Record<string, string>])[0][path.slice('/out'.length)], path).toBe(
        createHash('sha256').update(bytes).digest('hex'),
      );
  });
});

describe('going on', () => {
  it('leaves alone what is unchanged, and fits again what is not: inputs, options or result', async () => {
    const out = testFolder();
    cpSync(fitted, out, { recursive: true });
    const again = async (seedOfWest = 1): Promise<string[]> => {
      const works = worksOf(fleet, out);
      works[2] = worksOf(fleet, out, seedOfWest)[2]!;
      const { results } = await run(works, 1);
      return results.map((one) => (one?.facts == null ? 'failed' : one.isUnchanged ? 'unchanged' : 'fitted'));
    };
    expect(await again()).toEqual(['unchanged', 'unchanged', 'unchanged']);
    writeFileSync(join(out, 'south', 'hindcast.json'), 'spoilt');
    writeFileSync(join(out, 'west', 'fit-record.json'), '{"format":1');
    expect(await again()).toEqual(['unchanged', 'fitted', 'fitted']);
    expect(digests(out)).toEqual(digests(fitted));
    const log = join(fleet, 'north', 'log.csv');
    const whole = readFileSync(log, 'utf8');
    onTestFinished(() => writeFileSync(log, whole));
    writeFileSync(log, whole.split('\n').slice(0, -20).join('\n'));
    expect(await again(2)).toEqual(['fitted', 'unchanged', 'fitted']);
  });

  it('after an interrupt, with what is finished kept and nothing half-written', async () => {
    const out = testFolder();
    const interrupt = new AbortController();
    const progress = { ...QUIET, done: () => interrupt.abort() };
    const { results, isStopped } = await runFleet(worksOf(fleet, out), {
      threads: 1,
      progress,
      signal: interrupt.signal,
    });
    expect(isStopped).toBe(true);
    // The heaviest went first.
    expect(results.map((one) => one?.label ?? null)).toEqual([null, null, 'west']);
    expect(readdirSync(out)).toEqual(['west']);
    const { results: rest } = await run(worksOf(fleet, out), 1);
    expect(rest.map((one) => one?.facts != null && one.isUnchanged)).toEqual([false, false, true]);
  });
});

it('a place that cannot be written fails its own site alone', async () => {
  const out = testFolder();
  writeFileSync(join(out, 'north'), 'in the way');
  const { results } = await run(worksOf(fleet, out, 1, ['north', 'south']), 1);
  expect(results[0]!.problem).toMatch(/cannot write .*north.*a file stands where a folder is wanted/);
  expect(results[1]!.problem).toBeNull();
  expect(readFileSync(join(out, 'north'), 'utf8')).toBe('in the way');
});

describe('a worker that dies', () => {
  it.each([
    ['leaves', /its worker ended early \(worker exited with code: 7\)/],
    ['hungry', /its worker ran out of memory/],
  ])('%s: fails its one site, and the pool goes on', async (how, words) => {
    const one = worksOf(fleet, '/out', 1, ['north'])[0]!;
    const works = ['a', how, 'b', 'c'].map(
      (label): FleetWork => ({
        ...one,
        label,
        task: { ...one.task!, job: { ...one.task!.job, out: `/out/${label}` } },
      }),
    );
    const { results, isStopped } = await runFleet(works, {
      threads: 1,
      progress: QUIET,
      signal: new AbortController().signal,
      heapMb: 64,
      workerFile: new URL('./worker-deaths.mjs', import.meta.url),
    });
    expect(isStopped).toBe(false);
    expect(results[1]!.problem).toMatch(words);
    expect([0, 2, 3].map((k) => results[k]!.problem)).toEqual(['lived: /out/a', 'lived: /out/b', 'lived: /out/c']);
  });
});
