import { describe, expect, test } from 'vitest';
import type { OpenReadings } from '../../../runtime/ingest/align.ts';
import { decodeCheckpoint, encodeCheckpoint } from '../../../runtime/residuals/checkpoint.ts';
import { readWal, startWal, Wal, type WalRecord } from '../../../runtime/residuals/wal.ts';
import { MemoryDisk } from '../../support/memory-disk.ts';
import { seededNumbers } from '../../support/models.ts';

const head = { channelCount: 3, stream: new Uint8Array([1, 2, 3, 4, 5, 6, 7, 8]), number: 42 };
const marks = { newestMs: 123_456, counters: [Number.NaN, 7, Number.NaN], latest: [1000, Number.NaN, 2000.5] };
const open: OpenReadings = {
  marks,
  visit(take) {
    take(0, 1000, 1.5);
    take(2, 2000.5, -2);
  },
};
const opened: WalRecord[] = [
  { kind: 'start', marks },
  {
    kind: 'readings',
    channels: Uint16Array.of(0, 2),
    times: Float64Array.of(1000, 2000.5),
    values: Float64Array.of(1.5, -2),
  },
];

function written(): { bytes: Uint8Array; ends: number[] } {
  const disk = new MemoryDisk();
  const length = startWal(disk, 'j/1', head, open);
  const wal = new Wal(disk, 'j/1', length);
  // Head, the frame of marks, and the readings behind it: 9 + 2 × 18 bytes.
  const ends = [24, length - 45, length];
  const note = (): void => {
    wal.flush();
    ends.push(disk.size('j/1'));
  };
  wal.tick(100, Float64Array.of(1, Number.NaN, 0.1));
  note();
  wal.change({ tick: 99, channel: 2, value: 3.25 });
  note();
  wal.reading(1, 5000, 0.1);
  wal.reading(0, 5000.25, -0);
  note();
  wal.tick(101, Float64Array.of(Number.NaN, 2, -1e-300));
  note();
  return { bytes: disk.read('j/1')!, ends };
}

const { bytes, ends } = written();
const all = readWal(bytes)!.records;

test('what was written comes back', () => {
  expect(readWal(bytes)!.head).toEqual(head);
  expect(all).toEqual([
    ...opened,
    { kind: 'tick', tick: 100, values: Float64Array.of(1, Number.NaN, 0.1) },
    { kind: 'change', tick: 99, channel: 2, value: 3.25 },
    {
      kind: 'readings',
      channels: Uint16Array.of(1, 0),
      times: Float64Array.of(5000, 5000.25),
      values: Float64Array.of(0.1, -0),
    },
    { kind: 'tick', tick: 101, values: Float64Array.of(Number.NaN, 2, -1e-300) },
  ]);
});

test('many readings without a pause share frames and lose none', () => {
  const disk = new MemoryDisk();
  const wal = new Wal(disk, 'j/1', startWal(disk, 'j/1', head, { marks, visit: () => {} }));
  for (let i = 0; i < 20_000; i++) wal.reading(i % 3, i, 2 * i);
  wal.flush();
  const { records, validBytes } = readWal(disk.read('j/1')!)!;
  const readings = records.flatMap((record) => (record.kind === 'readings' ? [...record.values] : []));
  expect(readings).toEqual(Array.from({ length: 20_000 }, (_, i) => 2 * i));
  expect(validBytes).toBe(disk.size('j/1'));
  expect(validBytes).toBe(wal.bytes);
  expect(records.length).toBeLessThan(20);
  expect(disk.operations).toBeLessThan(20);
});

test('a sync covers what was gathered, and a file in use is let go only after it', async () => {
  const disk = new MemoryDisk();
  const wal = new Wal(disk, 'j/1', startWal(disk, 'j/1', head, open));
  expect(wal.isDurable).toBe(true);
  wal.reading(0, 1, 1);
  expect(wal.isDurable).toBe(false);
  const syncing = wal.syncSoon();
  expect(wal.isDurable).toBe(false);
  wal.reading(0, 2, 2);
  wal.close();
  await syncing;
  expect(wal.isDirty).toBe(true);
  const kept = disk.afterPowerCut('nothing').read('j/1')!;
  expect(readWal(kept)!.records.at(-1)).toMatchObject({ kind: 'readings', values: Float64Array.of(1) });
});

describe('a torn tail', () => {
  /** Records whose frames end within the first `length` bytes. */
  const whole = (length: number): readonly WalRecord[] => all.slice(0, ends.filter((end) => end <= length).length - 1);

  test('cut at every byte keeps the whole records before, and says where they end', () => {
    for (let length = ends[0]!; length <= bytes.length; length++) {
      const content = readWal(bytes.subarray(0, length))!;
      expect(content.records).toEqual(whole(length));
      expect(ends).toContain(content.validBytes);
    }
  });

  test('filled with zeros from any byte invents nothing', () => {
    for (let from = ends[0]!; from < bytes.length; from++) {
      const zeroed = Uint8Array.from(bytes).fill(0, from);
      const { records } = readWal(zeroed)!;
      // Zeros that stood there anyway leave their record whole.
      const same = zeroed.every((byte, i) => byte === bytes[i]);
      if (!same) expect(records.length).toBeLessThan(all.length);
      expect(all.slice(0, records.length)).toEqual(records);
    }
  });

  test('of noise from any byte invents nothing', () => {
    const random = seededNumbers(5);
    for (let from = ends[0]!; from < bytes.length; from++) {
      const noisy = Uint8Array.from(bytes, (byte, i) => (i < from ? byte : Math.floor(random() * 256)));
      const { records } = readWal(noisy)!;
      expect(records).toEqual(all.slice(0, records.length));
      expect(records.length).toBeLessThanOrEqual(whole(from).length + 1);
    }
  });

  test('in the head leaves nothing to believe', () => {
    for (let length = 0; length < ends[0]!; length++) expect(readWal(bytes.subarray(0, length))).toBeNull();
    for (let i = 0; i < ends[0]!; i++)
      expect(readWal(Uint8Array.from(bytes, (byte, j) => (i === j ? byte ^ 1 : byte)))).toBeNull();
  });
});

test('appending goes on behind the last whole record', () => {
  const disk = new MemoryDisk();
  disk.write('j/1', bytes.subarray(0, bytes.length - 3));
  const { validBytes } = readWal(disk.read('j/1')!)!;
  const wal = new Wal(disk, 'j/1', validBytes);
  wal.tick(102, Float64Array.of(4, 5, 6));
  wal.flush();
  expect(readWal(disk.read('j/1')!)!.records).toEqual([
    ...all.slice(0, 5),
    { kind: 'tick', tick: 102, values: Float64Array.of(4, 5, 6) },
  ]);
});

describe('a checkpoint', () => {
  const checkpoint = {
    stream: head.stream,
    number: 7,
    sinceKeyed: 3,
    bundle: new Uint8Array(32).fill(8),
    state: new Uint8Array([1, 2, 3]),
    bounds: new Uint8Array([4, 5]),
    budget: { coarseness: Uint8Array.of(0, 3, 15), bytesPerTick: 2.5, ticks: 600, startBytes: 1234 },
  };

  test('comes back', () => expect(decodeCheckpoint(encodeCheckpoint(checkpoint))).toEqual(checkpoint));

  test('of an earlier program comes back too, without a budget', () => {
    const earlier = { ...checkpoint, budget: null };
    const bytes = encodeCheckpoint(earlier);
    expect(Buffer.from(bytes.subarray(0, 4)).toString('latin1')).toBe('SWC1');
    expect(bytes.length).toBe(64 + 5);
    expect(decodeCheckpoint(bytes)).toEqual(earlier);
  });

  test('cut or with any bit turned is not believed', () => {
    const good = encodeCheckpoint(checkpoint);
    for (let length = 0; length < good.length; length++) expect(decodeCheckpoint(good.subarray(0, length))).toBeNull();
    for (let bit = 0; bit < 8 * good.length; bit++) {
      const turned = Uint8Array.from(good);
      turned[bit >> 3]! ^= 1 << (bit & 7);
      expect(decodeCheckpoint(turned)).toBeNull();
    }
  });
});
