/** Warnings over a restart of the gateway: what was open goes on, from whatever the disk still holds. */
import { parseSite } from '@stillwell/protocol';
import { beforeEach, describe, expect, test } from 'vitest';
import { MemoryDisk } from '../../support/memory-disk.ts';
import { SITE_TEXT } from '../../support/running-site.ts';
import { at, FIRST, Life, last, said, settled, TOPIC } from '../../support/warning-life.ts';

beforeEach(() => Life.forget());

describe('a restart', () => {
  test('goes on under the same since: no second opening, nothing lost', async () => {
    const life = new Life(new MemoryDisk(), FIRST);
    for (const level of [12, 13.5]) await life.step(level, {});
    await life.step(13.8, { high: 0.9, low: 0.7 });
    await life.step(14.2, { high: 0.99, low: 0.7 });
    const next = new Life(life.disk.afterPowerCut('nothing'), FIRST + 6);
    Life.heard = [];
    await next.step(13, { high: 0.8, low: 0.1 });
    expect(last()).toMatchObject({
      open: 2,
      warnings: [
        { limit: 'high', status: 'updated', since: at(FIRST + 2), crossed_at: at(FIRST + 3) },
        { limit: 'low', status: 'updated', since: at(FIRST + 2) },
      ],
    });
    await next.step(13, { high: 0.8, low: 0.1 });
    expect(last().warnings[1]).toMatchObject({ limit: 'low', status: 'closed' });
    expect(next.warnings.opened).toBe(0);
  });

  test('an end that nobody heard is said by the next life', async () => {
    const life = new Life(new MemoryDisk(), FIRST);
    await life.step(10, { high: 0.9 });
    life.failing = true;
    for (let k = 0; k < 2; k++) await life.step(10, {});
    expect(Life.retained.size).toBe(1);
    const next = new Life(life.disk.afterPowerCut('nothing'), FIRST + 4);
    await next.step(10, {});
    expect(said().at(-1)).toEqual(['high', 'closed']);
    expect(Life.retained.size).toBe(0);
    Life.heard = [];
    await new Life(next.disk.afterPowerCut('nothing'), FIRST + 6).step(10, {});
    expect(said()).toEqual([]);
  });

  test('at any cut of the power: open on the disk or never said', async () => {
    const whole = new MemoryDisk();
    await new Life(whole, FIRST).step(10, { high: 0.9 });
    expect(whole.operations).toBeGreaterThan(3);
    for (let cutAt = 0; cutAt <= whole.operations; cutAt++) {
      Life.forget();
      const disk = new MemoryDisk();
      const life = new Life(disk, FIRST);
      disk.cutAt = cutAt;
      // The machine stops at the cut: what would be published after it is not.
      life.isReady = cutAt >= whole.operations;
      await life.step(10, { high: 0.9 });
      const next = new Life(disk.afterPowerCut('nothing'), FIRST + 2);
      await next.step(10, { high: 0.9 });
      expect(said().filter(([, status]) => status === 'opened').length).toBeLessThanOrEqual(1);
      expect(last()).toMatchObject({ open: 1 });
    }
  });

  test('after longer than a forecast reaches it is another warning', async () => {
    const life = new Life(new MemoryDisk(), FIRST);
    await life.step(10, { high: 0.9 });
    const next = new Life(life.disk, FIRST + 100);
    await next.step(10, {});
    expect(last().warnings).toMatchObject([
      { status: 'expired', reason: 'nothing was forecast for 100 ticks', likely: null },
    ]);
    const late = new Life(life.disk, FIRST + 200);
    await late.step(10, { high: 0.9 });
    expect(last().warnings).toMatchObject([{ status: 'opened', since: at(FIRST + 200) }]);
  });

  test('with another limit, or without the signal, in the site file', async () => {
    const life = new Life(new MemoryDisk(), FIRST);
    await life.step(10, { high: 0.9 });
    const other = parseSite(SITE_TEXT.replace('high: 14', 'high: 13'), 'site');
    const copy = life.disk.afterPowerCut('everything');
    const next = new Life(copy, FIRST + 2, other);
    next.warnings.tick(
      next.serving,
      { site: other, gateway: 'g1', issuedAtMs: 0, isCatchingUp: false, plans: undefined as never, inputs: [] },
      [[], []],
    );
    await settled();
    expect(last()).toMatchObject({
      open: 0,
      warnings: [{ value: 14, status: 'expired', reason: 'the limit has changed in the site file' }],
    });
    Life.retained.set(TOPIC, new Uint8Array(1));
    const renamed = new Life(life.disk, FIRST + 2, parseSite(SITE_TEXT.replace('name: level', 'name: depth'), 'site'));
    await renamed.look({});
    expect(Life.retained.size).toBe(0);
  });

  test.each([
    '{',
    '[]',
    '{"format":2,"warnings":[]}',
    '{"format":1,"warnings":[{"signal":"level"}]}',
    '{"format":1,"warnings":[null]}',
  ])('from a damaged file, %s: told once, and it opens again', async (text) => {
    const disk = new MemoryDisk();
    disk.write('data/warnings.json', new TextEncoder().encode(text));
    const life = new Life(disk, FIRST);
    expect(life.log).toEqual([expect.stringMatching(/^warnings.json in the data folder is damaged/)]);
    await life.step(10, { high: 0.9 });
    expect(said()).toEqual([['high', 'opened']]);
  });

  test('a disk that takes nothing stops no warning, and is told of once', async () => {
    const life = new Life(new MemoryDisk(), FIRST);
    life.disk.fault = 'ENOSPC';
    life.disk.faultAt = 0;
    await life.step(10, { high: 0.9 });
    await life.step(10, { high: 0.9 });
    expect(said()).toEqual([['high', 'opened']]);
    expect(life.log).toEqual([expect.stringMatching(/^open warnings not kept on disk: ENOSPC/)]);
    life.disk.repair();
    await life.step(10, { high: 0.9 });
    expect(life.disk.size('data/warnings.json')).toBeGreaterThan(10);
  });
});
