import { SegmentWriter, segmentHash } from '@stillwell/protocol';
import { beforeEach, describe, expect, test } from 'vitest';
import type { Clock } from '../../../runtime/clock.ts';
import { RuntimeError, type RuntimeErrorCode } from '../../../runtime/errors.ts';
import { Shipper } from '../../../runtime/residuals/ship.ts';
import { Spool } from '../../../runtime/residuals/spool.ts';
import { MemoryDisk } from '../../support/memory-disk.ts';

const STREAM = '0102030405060708';

function segment(number: number, keyed: boolean, ticks = 4): Uint8Array {
  const writer = new SegmentWriter({
    site: 's',
    gateway: 'g',
    stream: Buffer.from(STREAM, 'hex'),
    number,
    bundle: new Uint8Array(32).fill(1),
    firstTick: number * 100,
    channelCount: 1,
    signalCount: 1,
    residualScaleSteps: Float64Array.of(1),
    startState: new Uint8Array(0),
    keyed,
  });
  for (let i = 0; i < ticks; i++) writer.push(Float64Array.of(i), Float64Array.of(0));
  return writer.finish(new Uint8Array(0));
}

let now: number;
let disk: MemoryDisk;
let spool: Spool;
let sent: number[];
let outcome: RuntimeErrorCode | null;
let shipper: Shipper;
const clock: Clock = { wall: () => now, monotonic: () => now, after: () => () => {} };

beforeEach(() => {
  now = 0;
  disk = new MemoryDisk();
  spool = new Spool(disk, 'spool', 1e9, STREAM);
  sent = [];
  outcome = null;
  shipper = new Shipper({
    spool,
    clock,
    window: () => 3,
    send: async (bytes) => {
      sent.push(Buffer.from(bytes).readUInt8(47));
      if (outcome !== null) throw new RuntimeError(outcome, 'no');
    },
  });
});

/** Numbers as sent: the byte behind magic, versions, flags, stream and digest. */
async function poke(): Promise<number[]> {
  sent.length = 0;
  shipper.poke();
  await Promise.resolve();
  await new Promise((resolve) => setImmediate(resolve));
  return [...sent];
}

function put(...numbers: number[]): void {
  for (const number of numbers) spool.put(STREAM, number, segment(number, number === 0));
}

const receipt = (number: number) => shipper.receipt(STREAM, number, segmentHash(segment(number, number === 0)));

describe('sending', () => {
  test('waits for the connection and for the boundary, goes oldest first, no more than the window', async () => {
    put(0, 1, 2, 3, 4);
    shipper.release(STREAM, 2);
    expect(await poke()).toEqual([]);
    shipper.connected();
    await Promise.resolve();
    expect(sent).toEqual([0, 1]);
    shipper.release(STREAM, 5);
    expect(sent).toEqual([0, 1, 2]);
    expect(await poke()).toEqual([]);
    expect(receipt(0)).toBe('confirmed');
    expect(receipt(0)).toBe('unknown');
    expect(await poke()).toEqual([3]);
  });

  test('goes again with growing waits until the receipt', async () => {
    put(0);
    shipper.release(STREAM, 1);
    shipper.connected();
    const times: number[] = [0];
    await poke();
    for (now = 1000; now < 3_000_000; now += 1000) if ((await poke()).length > 0) times.push(now / 1000);
    expect(times.slice(0, 6)).toEqual([0, 30, 90, 210, 450, 930]);
    expect(times[6]! - times[5]!).toBe(600);
  });

  test('what is unconfirmed goes again soon after a reconnect, but not at once', async () => {
    put(0);
    shipper.release(STREAM, 1);
    shipper.connected();
    await poke();
    now = 1000;
    shipper.lost();
    shipper.connected();
    expect(await poke()).toEqual([]);
    now = 6000;
    expect(await poke()).toEqual([0]);
  });

  test('one too large for the broker is set aside and the others go on', async () => {
    put(0, 1);
    outcome = 'too-large';
    shipper.release(STREAM, 1);
    shipper.connected();
    await poke();
    outcome = null;
    shipper.release(STREAM, 2);
    await poke();
    expect(shipper.counts).toMatchObject({ parked: 1, sent: 1 });
    now = 1e7;
    expect(await poke()).toEqual([1]);
  });
});

test('a disk that does not give a segment is asked again later and stops nothing', async () => {
  put(0, 1);
  shipper.release(STREAM, 2);
  const read = disk.read.bind(disk);
  disk.read = (path) => {
    if (path.includes('-0000000000')) throw Object.assign(new Error('EIO: i/o error, read'), { code: 'EIO' });
    return read(path);
  };
  shipper.connected();
  expect(sent).toEqual([1]);
  expect(await poke()).toEqual([]);
  disk.read = read;
  now = 30_000;
  expect(await poke()).toEqual([0, 1]);
  expect(spool.damaged).toBe(0);
});

test('a segment damaged on disk is dropped and counted', async () => {
  put(0, 1);
  shipper.release(STREAM, 2);
  disk.write(`spool/${disk.list('spool')[0]}`, new Uint8Array(10));
  shipper.connected();
  expect(sent).toEqual([1]);
  expect(spool.waiting).toHaveLength(1);
  expect(spool.damaged).toBe(1);
});

test('a receipt with another hash deletes nothing and sets the segment aside', async () => {
  put(0);
  shipper.release(STREAM, 1);
  shipper.connected();
  expect(shipper.receipt(STREAM, 0, new Uint8Array(32))).toBe('conflict');
  expect(spool.waiting).toHaveLength(1);
  now = 1e7;
  expect(await poke()).toEqual([]);
});

describe('the spool', () => {
  test('knows its segments again, those of older streams first', () => {
    put(0, 1);
    const other = 'ffffffffffffffff';
    spool.put(other, 9, segment(9, true));
    const again = new Spool(disk, 'spool', 1e9, STREAM);
    expect(again.waiting.map((entry) => [entry.stream, entry.number])).toEqual([
      [other, 9],
      [STREAM, 0],
      [STREAM, 1],
    ]);
    expect(again.bytes).toBe(spool.bytes);
  });

  test('sheds the oldest when over its bound, with the chained ones that hang on them', () => {
    const small = new Spool(disk, 'spool', 3 * segment(0, true).length, STREAM);
    for (const [number, keyed] of [
      [0, true],
      [1, false],
      [2, false],
      [3, true],
      [4, false],
    ] as const)
      small.put(STREAM, number, segment(number, keyed));
    expect(small.shed().segments).toBe(3);
    expect(small.waiting.map((entry) => entry.number)).toEqual([3, 4]);
    expect(small.shed().segments).toBe(0);
  });

  test('drops a file that was damaged on disk instead of sending it', async () => {
    put(0, 1);
    const name = `spool/${disk.list('spool')[0]}`;
    disk.write(name, Buffer.from(disk.read(name)!).fill(0, 10, 12));
    shipper.release(STREAM, 2);
    shipper.connected();
    expect(await poke()).toEqual([]);
    expect(spool.waiting.map((entry) => entry.number)).toEqual([1]);
  });
});
