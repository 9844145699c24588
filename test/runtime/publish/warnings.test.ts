/** Warnings of a gateway: what is published of scripted outlooks, kept on disk, and said again after failures and restarts. */
import { type LimitWarning, parseSite, parseWarningMessage, topicsOf } from '@stillwell/protocol';
import { modelFromBundle } from '@stillwell/runtime/filter';
import { beforeEach, describe, expect, test } from 'vitest';
import type { Outgoing } from '../../../runtime/mqtt/connection.ts';
import type { Occasion } from '../../../runtime/publish/moment.ts';
import { LIMITS, type Outlook } from '../../../runtime/publish/outlooks.ts';
import { Warnings } from '../../../runtime/publish/warnings.ts';
import { Serving } from '../../../runtime/serving.ts';
import { MemoryDisk } from '../../support/memory-disk.ts';
import { syntheticBundle } from '../../support/models.ts';
import { SITE_TEXT } from '../../support/running-site.ts';

/** Tick 1 min, horizon 24: closes after 2 ticks, renewed every 6. */
const site = parseSite(
  SITE_TEXT.replace('limits: { high: 14 }', 'limits: { high_high: 15, high: 14, low: 5 }'),
  'site',
);
const topics = topicsOf(site.root, site.site);
const TOPIC = topics.warning('level');
const bundle = syntheticBundle({ signals: ['level', 'flow'], inputs: ['pump'], tickMs: 60_000, warmupTicks: 3 });
const checked = { bundle, model: modelFromBundle(bundle), digest: new Uint8Array(32), epoch: 1, sequence: 1 };
const FIRST = 29_000_000;

/** One gateway's life beside a broker that keeps what is retained. */
class Life {
  readonly disk: MemoryDisk;
  readonly serving = new Serving(checked);
  readonly warnings: Warnings;
  readonly log: string[] = [];
  static retained = new Map<string, Uint8Array>();
  static heard: { topic: string; text: string; retain: boolean; expiry: number | undefined }[] = [];
  isReady = true;
  failing = false;
  tick: number;

  constructor(disk: MemoryDisk, tick: number, text: typeof site = site) {
    this.disk = disk;
    this.tick = tick;
    const take = (line: string): void => void this.log.push(line);
    this.warnings = new Warnings({
      site: text,
      topics,
      disk,
      folder: 'data',
      log: { debug: take, info: take, warn: take, error: take },
      isWallTime: true,
      isReady: () => this.isReady,
      publish: (message) => this.#publish(message),
    });
    for (let k = 6; k > 0; k--) this.serving.step(tick - k, Float64Array.of(10, 10, 10));
  }

  async #publish({ topic, payload, qos, retain, expirySeconds }: Outgoing): Promise<void> {
    expect(qos).toBe(1);
    if (this.failing) throw new Error('lost');
    const bytes = payload as Uint8Array;
    Life.heard.push({ topic, text: new TextDecoder().decode(bytes), retain, expiry: expirySeconds });
    if (!retain) return;
    if (bytes.length === 0) Life.retained.delete(topic);
    else Life.retained.set(topic, bytes);
  }

  /** Steps a tick with a reading of the level, and says these probabilities of its limits, in the order of LIMITS. */
  async step(level: number, chances: Partial<Record<'high_high' | 'high' | 'low', number>>, isCatchingUp = false) {
    this.serving.step(this.tick, Float64Array.of(level, 10, 10));
    await this.look(chances, isCatchingUp);
    this.tick++;
  }

  async look(chances: Partial<Record<string, number>>, isCatchingUp = false, serving = this.serving): Promise<void> {
    const issuedAtMs = (serving.tick + 1) * 60_000;
    const plans = undefined as never;
    const occasion: Occasion = { site, gateway: 'g1', issuedAtMs, isCatchingUp, plans, inputs: [] };
    const outlooks = LIMITS.flatMap(([limit, key, side]): Outlook[] => {
      const value = site.signals[0]!.limits[key];
      const probability = chances[limit] ?? 0.01;
      const likely = probability > 0.5 ? 7 : null;
      return value === null
        ? []
        : [{ limit, key, side, value, probability, earliest: likely && 3, step: likely, likely, latest: null }];
    });
    this.warnings.tick(serving, occasion, [outlooks, []]);
    await settled();
  }
}

const settled = (): Promise<void> => new Promise((resolve) => setImmediate(resolve));
const words = (): { topic: string; retain: boolean; open: number; warnings: LimitWordsOf[] }[] =>
  Life.heard.flatMap(({ topic, text, retain }) => {
    if (text === '') return [];
    const { open, warnings } = parseWarningMessage(new TextEncoder().encode(text));
    return [{ topic, retain, open, warnings: warnings.map(({ limit, status }) => [limit, status]) }];
  });
type LimitWordsOf = [LimitWarning['limit'], LimitWarning['status']];
const said = () => words().flatMap((one) => one.warnings);
const last = () => parseWarningMessage(new TextEncoder().encode(Life.heard.findLast(({ text }) => text !== '')!.text));
const at = (tick: number): string => new Date(tick * 60_000).toISOString();

beforeEach(() => {
  Life.retained = new Map();
  Life.heard = [];
});

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
      Life.retained = new Map();
      Life.heard = [];
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
