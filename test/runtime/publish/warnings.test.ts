/** Warnings of a gateway: what is published of scripted outlooks, said again after failures of the line, and when it expires. */
import { beforeEach, describe, expect, test } from 'vitest';
import { Serving } from '../../../runtime/serving.ts';
import { MemoryDisk } from '../../support/memory-disk.ts';
import { at, checked, FIRST, Life, last, said, settled, site, TOPIC, words } from '../../support/warning-life.ts';

beforeEach(() => Life.forget());

describe('a life', () => {
  test('one message with all limits; opened, updated, closed, blanked', async () => {
    const life = new Life(new MemoryDisk(), FIRST);
    await life.step(10, { high: 0.4 });
    // At the start the topic is blanked once: an earlier life may have left something.
    expect(Life.heard.map(({ topic, text }) => [topic, text])).toEqual([[TOPIC, '']]);
    Life.heard = [];
    await life.step(10, { high: 0.6 });
    expect(last()).toMatchObject({
      signal: 'level',
      unit: 'm',
      origin: at(FIRST + 1),
      horizon: 24,
      open: 1,
      valid_until: new Date((FIRST + 1 + 6 + 5) * 60_000 + 30_000).toISOString(),
      warnings: [
        {
          limit: 'high',
          side: 'above',
          value: 14,
          status: 'opened',
          since: at(FIRST + 1),
          probability: 0.6,
          earliest: at(FIRST + 4),
          likely: at(FIRST + 8),
          latest: null,
          crossed_at: null,
        },
      ],
    });
    expect(Life.heard[0]!.expiry).toBe(10.5 * 60);
    await life.step(12, { high: 0.65 });
    await life.step(13, { high: 0.9, high_high: 0.55 });
    await life.step(14.5, { high: 0.99, high_high: 0.6 });
    expect(last().warnings.map(({ limit, crossed_at }) => [limit, crossed_at])).toEqual([
      ['high_high', null],
      ['high', at(FIRST + 4)],
    ]);
    expect(
      words()
        .slice(1)
        .map((one) => one.warnings),
    ).toEqual([
      [
        ['high_high', 'opened'],
        ['high', 'updated'],
      ],
      [
        ['high_high', 'updated'],
        ['high', 'updated'],
      ],
    ]);
    Life.heard = [];
    for (let k = 0; k < 2; k++) await life.step(12, { high: 0.5, high_high: 0.1 });
    expect(last()).toMatchObject({ open: 1, warnings: [{ limit: 'high_high', status: 'closed' }, { limit: 'high' }] });
    expect(Life.retained.get(TOPIC)).toBeDefined();
    Life.heard = [];
    for (let k = 0; k < 2; k++) await life.step(10, { high: 0.1 });
    expect(last()).toMatchObject({
      open: 0,
      warnings: [{ status: 'closed', since: at(FIRST + 1), crossed_at: at(FIRST + 4) }],
    });
    expect(Life.heard.at(-1)).toMatchObject({ topic: TOPIC, text: '', retain: true });
    expect(words().at(-1)!.retain).toBe(false);
    expect(Life.retained.size).toBe(0);
    expect(life.warnings).toMatchObject({ open: 0, opened: 2 });
  });

  test('a limit that is passed already needs no forecast', async () => {
    const life = new Life(new MemoryDisk(), FIRST);
    for (const level of [12, 13, 13.9]) await life.step(level, {});
    for (let k = 0; k < 3; k++) await life.step(14.5, { high: 1 });
    expect(said()).toEqual([]);
  });

  test('behind an interruption nothing opens or closes', async () => {
    const life = new Life(new MemoryDisk(), FIRST);
    await life.step(10, { high: 0.9 }, true);
    expect(said()).toEqual([]);
    await life.step(10, { high: 0.9 });
    for (let k = 0; k < 5; k++) await life.step(10, { high: 0.01 }, true);
    expect(said()).toEqual([['high', 'opened']]);
  });
});

describe('a broker that is away, or loses what it was told', () => {
  test('nothing is sent meanwhile; then what is open', async () => {
    const life = new Life(new MemoryDisk(), FIRST);
    life.isReady = false;
    await life.step(10, { high: 0.9 });
    await life.step(10, { high: 0.9 });
    expect(Life.heard).toEqual([]);
    life.isReady = true;
    await life.step(10, { high: 0.9 });
    expect(said()).toEqual([['high', 'opened']]);
    expect(last().warnings[0]!.since).toBe(at(FIRST));
  });

  test('what opened and closed unheard is never told of; an end unheard is', async () => {
    const life = new Life(new MemoryDisk(), FIRST);
    life.isReady = false;
    await life.step(10, { low: 0.9 });
    for (let k = 0; k < 3; k++) await life.step(10, {});
    life.isReady = true;
    await life.step(10, { high: 0.9 });
    life.isReady = false;
    for (let k = 0; k < 3; k++) await life.step(10, {});
    life.isReady = true;
    await life.step(10, {});
    expect(said()).toEqual([
      ['high', 'opened'],
      ['high', 'closed'],
    ]);
    expect(Life.retained.size).toBe(0);
  });

  test('a message that failed is said again with the next tick, the first word as the first', async () => {
    const life = new Life(new MemoryDisk(), FIRST);
    life.failing = true;
    await life.step(10, { high: 0.9 });
    life.failing = false;
    await life.step(10, { high: 0.9 });
    await life.step(10, { high: 0.9 });
    expect(said()).toEqual([['high', 'opened']]);
    life.failing = true;
    for (let k = 0; k < 3; k++) await life.step(10, {});
    life.failing = false;
    await life.step(10, {});
    expect(said().at(-1)).toEqual(['high', 'closed']);
    expect(Life.retained.size).toBe(0);
  });

  test('after a reconnect what is open is said again', async () => {
    const life = new Life(new MemoryDisk(), FIRST);
    await life.step(10, { high: 0.9 });
    life.warnings.reconnected();
    await life.step(10, { high: 0.9 });
    expect(said()).toEqual([
      ['high', 'opened'],
      ['high', 'updated'],
    ]);
  });
});

describe('expires', () => {
  test('while the filter warms up, and without a bundle', async () => {
    const life = new Life(new MemoryDisk(), FIRST);
    await life.step(10, { high: 0.9 });
    const fresh = new Serving(checked);
    fresh.step(FIRST + 1, Float64Array.of(10, 10, 10));
    await life.look({ high: 0.9 }, false, fresh);
    expect(last()).toMatchObject({
      open: 0,
      quality: 'C',
      warnings: [{ status: 'expired', reason: 'warming up: 1 of 3 ticks' }],
    });
    await life.step(10, { high: 0.9 });
    life.warnings.without({ site: site.site, gateway: 'g1', issuedAtMs: (FIRST + 4) * 60_000 }, FIRST + 3);
    await settled();
    expect(last()).toMatchObject({
      open: 0,
      bundle: null,
      quality: 'F',
      warnings: [{ status: 'expired', reason: 'no bundle serves' }],
    });
    expect(Life.retained.size).toBe(0);
  });

  test('once nothing is known of the signal; one that is not heard opens nothing', async () => {
    const life = new Life(new MemoryDisk(), FIRST);
    await life.step(10, { high: 0.9 });
    for (let k = 0; k < 5; k++) await life.step(Number.NaN, { high: 0.9, low: 0.9 });
    // The low limit came at the first tick without a reading: too short to count as silence.
    expect(last()).toMatchObject({ open: 2, quality: 'M' });
    const quiet = new Life(new MemoryDisk(), FIRST);
    for (let k = 0; k < 3; k++) await quiet.step(Number.NaN, {});
    Life.heard = [];
    for (let k = 0; k < 5; k++) await quiet.step(Number.NaN, { high: 0.9 });
    expect(said()).toEqual([]);
    for (let k = 0; k < 24; k++) await life.step(Number.NaN, { high: 0.9, low: 0.9 });
    expect(last()).toMatchObject({
      open: 0,
      warnings: [
        { limit: 'high', status: 'expired', reason: 'no reading for 24 ticks or more' },
        { limit: 'low', status: 'expired' },
      ],
    });
  });
});
