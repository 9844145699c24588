/** What is dropped when the disk's bound is met, and how little of the chain a damaged segment takes along. */
import { readSegmentHead, SegmentWriter } from '@stillwell/protocol';
import { describe, expect, test } from 'vitest';
import { BundleKeeper } from '../../../runtime/bundle/change.ts';
import { Engine } from '../../../runtime/engine.ts';
import { RuntimeError } from '../../../runtime/errors.ts';
import { Shipper } from '../../../runtime/residuals/ship.ts';
import { Spool } from '../../../runtime/residuals/spool.ts';
import { opening } from '../../protocol/segment/opening.ts';
import { MemoryDisk } from '../../support/memory-disk.ts';
import { FIRST_TICK, plantMessages, sealedOf, site, trusted } from '../../support/running-site.ts';

const STREAM = '0102030405060708';

function segment(number: number, ticks: number, keyed = false): Uint8Array {
  const writer = new SegmentWriter(opening(1, { number, keyed }));
  for (let i = 0; i < ticks; i++) writer.push(Float64Array.of(i), Float64Array.of(i));
  return writer.finish(new Uint8Array(9));
}

function filled(maxBytes: number): { disk: MemoryDisk; spool: Spool } {
  const disk = new MemoryDisk();
  const spool = new Spool(disk, 'spool', maxBytes, STREAM);
  for (let number = 0; number < 6; number++) spool.put(STREAM, number, segment(number, 10 + number, number % 3 === 0));
  return { disk, spool };
}

describe('a spool past its bound', () => {
  test('drops the oldest up to the next that stands alone, and counts segments, bytes and ticks', () => {
    const whole = filled(1e6).spool.bytes;
    const { spool } = filled(whole - 1);
    const sizes = spool.waiting.map(({ bytes }) => bytes);
    expect(spool.shed()).toEqual({ segments: 3, bytes: sizes[0]! + sizes[1]! + sizes[2]!, ticks: 10 + 11 + 12 });
    expect(spool.waiting.map(({ number }) => number)).toEqual([3, 4, 5]);
    expect(spool.takeBreak()).toBe(false);
  });

  test('keeps the newest whatever its size, unless it hangs on what is gone; then the next must stand alone', () => {
    const { spool } = filled(1);
    expect(spool.shed()).toMatchObject({ segments: 6, ticks: 10 + 11 + 12 + 13 + 14 + 15 });
    expect(spool.takeBreak()).toBe(true);
    expect(spool.takeBreak()).toBe(false);
  });

  test('within its bound nothing goes', () => {
    const { spool } = filled(1e6);
    expect(spool.shed()).toEqual({ segments: 0, bytes: 0, ticks: 0 });
  });
});

test('any bit turned in a waiting segment is noticed when it is to be sent, and breaks the chain once', () => {
  const bytes = segment(0, 10, true);
  for (let bit = 0; bit < 8 * bytes.length; bit++) {
    const { disk, spool } = filled(1e6);
    const path = `spool/${STREAM}-0000000000.sws`;
    const turned = Uint8Array.from(bytes);
    turned[bit >> 3]! ^= 1 << (bit & 7);
    disk.write(path, turned);
    expect(spool.read(spool.waiting[0]!)).toBeNull();
    expect(spool.damaged).toBe(1);
    expect(spool.waiting.map(({ number }) => number)).toEqual([1, 2, 3, 4, 5]);
    expect(spool.takeBreak()).toBe(true);
  }
});

test('a segment that broker or desk will not have breaks the chain', async () => {
  const { spool } = filled(1e6);
  const clock = { wall: () => 0, monotonic: () => 0, after: () => () => {} };
  const refuse = async (): Promise<void> => {
    throw new RuntimeError('too-large', 'too large for this broker');
  };
  const shipper = new Shipper({ spool, clock, window: () => 1, send: refuse });
  shipper.connected();
  await new Promise((resolve) => setImmediate(resolve));
  expect(shipper.counts.parked).toBe(1);
  expect(spool.takeBreak()).toBe(true);
});

test('the gateway starts the next segment in full once it knows of a break', () => {
  const disk = new MemoryDisk();
  const keeper = new BundleKeeper(disk, 'data', site, trusted);
  const options = { site, gateway: 'g1', folder: 'data', segmentTicks: 20, spoolBytes: 1e9, note: () => {} };
  const engine = new Engine({ ...options, disk, stream: new Uint8Array(8).fill(9) }, keeper);
  const offered = keeper.offer(sealedOf(1), null);
  if (offered.outcome !== 'accepted') throw new Error(JSON.stringify(offered));
  engine.install(offered.checked);
  const plant = plantMessages(130);
  for (let n = 0; n < plant.length; n++) {
    if (n === 50) disk.write(`data/spool/${disk.list('data/spool')[1]}`, new Uint8Array(40));
    if (n === 55) for (const entry of [...engine.spool.waiting]) engine.spool.read(entry);
    for (const { topic, payload, timeMs } of plant[n]!) engine.message(topic, payload, timeMs, null);
    engine.close((FIRST_TICK + n + 1) * 60_000 + site.latenessMs);
    engine.settle();
  }
  const heads = disk.list('data/spool').map((name) => readSegmentHead(disk.read(`data/spool/${name}`)!));
  expect(heads.map(({ number, start }) => `${number} ${start}`)).toEqual([
    '0 keyed',
    '2 chained',
    '3 keyed',
    '4 chained',
    '5 chained',
  ]);
});
