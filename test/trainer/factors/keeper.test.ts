/** A reading interrupted anywhere leaves the same factors, the same time before the window and the same window. */
import { join } from 'node:path';
import { afterAll, expect, it } from 'vitest';
import { FactorsKeeper } from '../../../trainer/factors/keeper.ts';
import type { Interrupt } from '../../../trainer/history/interrupt.ts';
import { Interrupted } from '../../../trainer/history/interrupt.ts';
import { loadLong } from '../../../trainer/history/long.ts';
import { rows, wideCsv } from '../history/long-support.ts';
import { Folder, site } from '../history/support.ts';

const folder = new Folder();
afterAll(() => folder.remove());
const SITE = site(['level', 'flow'], { tickMs: 60_000, horizon: 6 });
const limits = { longFrom: 1200, recentTicks: 800, chunkTicks: 100, blockBytes: 4096 };
const resumeFile = join(folder.path, 'place');

/** Reads; what the factors know before the window, and what they are with it. */
async function read(path: string, looks: number, halfLifeTicks: number | null) {
  let keeper = new FactorsKeeper(SITE, halfLifeTicks);
  let asked = 0;
  const interrupt: Interrupt = {
    get isAsked() {
      return ++asked > looks;
    },
  };
  const loaded = await loadLong([path], SITE, { zone: null, limits, resumeFile, interrupt }, () => {
    keeper = new FactorsKeeper(SITE, halfLifeTicks);
    return keeper.sink();
  });
  loaded.done();
  const earlier = keeper.earlier();
  return { digest: earlier?.digest, window: loaded.series, factors: Buffer.from(keeper.close(loaded.series)!), asked };
}

it.each([null, 700])('interrupted at many a place, half-life %s', async (halfLifeTicks) => {
  const path = folder.write('all.csv', wideCsv(rows(4000)));
  const whole = await read(path, Number.POSITIVE_INFINITY, halfLifeTicks);
  expect(whole.digest).toBeDefined();
  for (const looks of [1, 12, 21, 30]) {
    expect(looks).toBeLessThan(whole.asked);
    await expect(read(path, looks, halfLifeTicks)).rejects.toThrow(Interrupted);
    const after = await read(path, Number.POSITIVE_INFINITY, halfLifeTicks);
    expect(after.asked).toBeLessThan(whole.asked);
    expect(after.digest).toEqual(whole.digest);
    expect(after.window.digest).toEqual(whole.window.digest);
    expect(after.factors.equals(whole.factors)).toBe(true);
  }
});
