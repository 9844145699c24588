/** Factors on a second thread, which is that of the last build; `npm test` makes it first. The same work done here is the measure. */
import { createHash } from 'node:crypto';
import { writeFileSync } from 'node:fs';
import { join } from 'node:path';
import { expect, it, onTestFinished, vi } from 'vitest';
import { parseSite } from '../../../protocol/index.ts';
import { TrainError } from '../../../trainer/errors.ts';
import { decodeFactors } from '../../../trainer/factors/file.ts';
import { FactorsKeeper } from '../../../trainer/factors/keeper.ts';
import { FIT_DEFAULTS } from '../../../trainer/fit-options.ts';
import { fitSite } from '../../../trainer/fit-site.ts';
import type { Series } from '../../../trainer/history/series.ts';
import { FactorsBeside } from '../../../trainer/threads/factors-beside.ts';
import { SecondThread } from '../../../trainer/threads/second-thread.ts';
import { testFolder } from '../../support/folder.ts';
import { wanderingDays } from '../../support/history.ts';

const SITE = parseSite(
  'site: weir\ntime_zone: UTC\ntick: 1h\nhorizon: 4\nsignals:\n  - {name: level}\n  - {name: flow}\n',
  'weir.yaml',
);
const CHUNK = 300;
const VALUES = wanderingDays(2, 40 * CHUNK, 5).map((one, c) =>
  one.map((value, t) => (t % 97 === c ? Number.NaN : value)),
);

function chunk(k: number): Series {
  const values = VALUES.map((one) => one.slice(k * CHUNK, (k + 1) * CHUNK));
  const names = ['level', 'flow'];
  return {
    ...{ tickMs: SITE.tickMs, firstTick: 1000 + k * CHUNK, ticks: CHUNK, names, signalCount: 2 },
    ...{ values, digest: new Uint8Array(32) },
  };
}

function thread(file?: URL): SecondThread {
  const second = new SecondThread(file);
  onTestFinished(() => second.end());
  return second;
}

it('gives the bytes that the main thread would, also after an interrupt', async () => {
  const here = new FactorsKeeper(SITE, 500);
  const first = new FactorsBeside(thread(), SITE, 500).sink();
  for (let k = 0; k < 20; k++) {
    here.sink().take(chunk(k));
    await first.take(chunk(k));
  }
  const snapshot = await first.snapshot();
  expect(Buffer.compare(snapshot, here.snapshot())).toBe(0);
  const beside = new FactorsBeside(thread(), SITE, 500);
  const sink = beside.sink();
  await sink.restore(snapshot);
  here.restore(snapshot);
  for (let k = 20; k < 39; k++) {
    here.sink().take(chunk(k));
    await sink.take(chunk(k));
  }
  sink.end?.();
  const earlier = await beside.earlier();
  expect(earlier?.ticks).toBe(39 * CHUNK);
  expect(earlier?.digest).toEqual(here.earlier()?.digest);
  expect(Buffer.compare((await beside.close(chunk(39)))!, here.close(chunk(39))!)).toBe(0);
});

it('goes on from factors as the main thread does, and answers others when it has closed them', async () => {
  const before = new FactorsKeeper(SITE, 500);
  const start = decodeFactors(before.close(chunk(0))!, 'factors.swf');
  const here = new FactorsKeeper(SITE, null, start);
  const second = thread();
  const beside = new FactorsBeside(second, SITE, null, start);
  expect((await beside.earlier())?.digest).toEqual(here.earlier()?.digest);
  expect(Buffer.compare((await beside.close(chunk(1), true))!, here.close(chunk(1))!)).toBe(0);
  expect(await second.ask('judging', null)).toBeNull();
});

it('has nothing earlier where nothing was older', async () => {
  expect(await new FactorsBeside(thread(), SITE, null).earlier()).toBeNull();
});

it('refuses as the main thread does', async () => {
  const second = thread();
  const beside = new FactorsBeside(second, SITE, null);
  const here = new FactorsKeeper(SITE, null);
  here.sink().take(chunk(1));
  await beside.sink().take(chunk(1));
  const refused = await second.ask('take', chunk(0)).catch((error: unknown) => error);
  expect(refused).toBeInstanceOf(TrainError);
  expect(() => here.sink().take(chunk(0))).toThrow((refused as TrainError).message);
  expect(refused).toMatchObject({ code: 'factors', details: { toTick: 1000 + 2 * CHUNK } });
  await expect(beside.sink().restore(Uint8Array.of(1, 2, 3))).rejects.toMatchObject({ code: 'factors' });
});

it('that dies is one clear error, to all who wait and who come later', async () => {
  const beside = new FactorsBeside(thread(new URL('./dies.mjs', import.meta.url)), SITE, null);
  for (const ask of [() => beside.earlier(), () => beside.close(chunk(0))]) {
    await expect(ask()).rejects.toMatchObject({
      code: 'fit',
      message: expect.stringMatching(/^the second thread of this fit ended early \(exit code 7\); try again/),
    });
  }
});

it.each([97_000, 26_000])(
  'a history of %d ticks gives the same files with it and without',
  { timeout: 180_000 },
  async (ticks) => {
    const folder = testFolder();
    const history = join(folder, 'log.csv');
    const [level, flow] = wanderingDays(2, ticks, 3) as [Float64Array, Float64Array];
    const rows = Array.from(level, (_, n) => `${1.7e9 + 3600 * n},${level[n]!.toFixed(1)},${flow[n]!.toFixed(1)}`);
    writeFileSync(history, `time,level,flow\n${rows.join('\n')}\n`);
    // Judged long enough, of the longer one, that rounding is held against fewer origins, which the second thread does; no longer.
    const { progress: _, ...options } = { ...FIT_DEFAULTS, learnShare: 0.8, calibrateShare: 0.1 };
    const job = { site: SITE, history: [history], out: '/out', zone: null, span: {}, halfLifeTicks: null, options };
    const watch = { reading: { update: () => {}, end: () => {} }, step: () => {}, end: () => {} };
    const seen: unknown[] = [];
    const asked = vi.spyOn(SecondThread.prototype, 'ask');
    onTestFinished(() => asked.mockRestore());
    for (const threads of [1, 2] as const) {
      const { files, loaded, notes, result } = await fitSite({ ...job, threads }, watch);
      expect(loaded.older?.ticks ?? 0).toBe(Math.max(0, ticks - 64_000));
      seen.push([
        files.map(({ path, bytes }) => [path, createHash('sha256').update(bytes).digest('hex')]),
        notes,
        result.audit,
        result.reliance,
      ]);
      const whats = asked.mock.calls.map(([what]) => what);
      const older = ticks > 64_000 ? ['take', 'earlier'] : [];
      if (threads === 1) expect(whats).toEqual([]);
      else expect(whats).toEqual(expect.arrayContaining([...older, 'begin', 'close', 'bounds', 'crossings']));
    }
    expect(seen[1]).toEqual(seen[0]);
    expect((seen[0] as [string[][]])[0].map(([path]) => path)).toContain('/out/factors.swf');
  },
);
