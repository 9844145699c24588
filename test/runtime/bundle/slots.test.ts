import { expect, test } from 'vitest';
import { type HighWater, raised, standing } from '../../../runtime/bundle/high-water.ts';
import { Slots } from '../../../runtime/bundle/slots.ts';
import { RuntimeError } from '../../../runtime/errors.ts';
import { MemoryDisk, PowerCut } from '../../support/memory-disk.ts';
import { seededNumbers } from '../../support/models.ts';

const OLD = new Uint8Array(300).fill(1);
const NEW = new Uint8Array(300).fill(2);

function prepared(): MemoryDisk {
  const disk = new MemoryDisk();
  const slots = new Slots(disk, 'data');
  const slot = slots.store(OLD);
  slots.raise(1, 4);
  slots.point(slot);
  return disk;
}

function change(disk: MemoryDisk): void {
  const slots = new Slots(disk, 'data');
  const slot = slots.store(NEW);
  slots.raise(1, 5);
  slots.point(slot);
}

test('a power cut at any operation of a change leaves the old bundle or the new, whole, and a mark that never falls', () => {
  const quiet = prepared();
  const before = quiet.operations;
  change(quiet);
  const count = quiet.operations - before;
  expect(count).toBeGreaterThanOrEqual(12);
  const random = seededNumbers(11);
  const outcomes = new Set<number>();
  for (let at = 0; at <= count; at++)
    for (let variant = 0; variant < 10; variant++) {
      const disk = prepared();
      disk.cutAt = disk.operations + at;
      try {
        change(disk);
      } catch (error) {
        if (!(error instanceof PowerCut)) throw error;
      }
      const survival = variant === 0 ? 'nothing' : variant === 1 ? 'everything' : random;
      const slots = new Slots(disk.afterPowerCut(survival), 'data');
      const bundle = slots.read(slots.serving!)!;
      expect([Buffer.from(OLD), Buffer.from(NEW)]).toContainEqual(Buffer.from(bundle));
      outcomes.add(bundle[0]!);
      const mark = slots.highWater[0]!.sequence;
      expect(mark).toBe(bundle[0] === 2 ? 5 : Math.max(4, mark));
      // The next change still goes through.
      const slot = slots.store(NEW);
      slots.raise(1, 6);
      slots.point(slot);
      expect(slots.read(slots.serving!)).toEqual(NEW);
    }
  expect([...outcomes].sort()).toEqual([1, 2]);
});

test('a failing disk at any operation leaves the old bundle serving', () => {
  for (let at = 0; at < 8; at++) {
    const disk = prepared();
    disk.fault = 'ENOSPC';
    disk.faultAt = disk.operations + at;
    expect(() => change(disk)).toThrow('ENOSPC');
    disk.repair();
    const slots = new Slots(disk, 'data');
    expect(slots.read(slots.serving!)).toEqual(OLD);
    expect(disk.list('data/slots').filter((name) => name.endsWith('.part'))).toEqual([]);
  }
});

test('a mark that cannot be read stops the start, since guessing would let old bundles in', () => {
  const disk = prepared();
  disk.write('data/slots/high-water', Buffer.from('[{"epoch":1'));
  expect(() => new Slots(disk, 'data')).toThrow(RuntimeError);
});

test('a pointer that cannot be read leaves both slots to be tried', () => {
  const disk = prepared();
  disk.write('data/slots/pointer', Buffer.from('?'));
  const slots = new Slots(disk, 'data');
  expect(slots.serving).toBeNull();
  expect(slots.inOrder()).toEqual(['a', 'b']);
});

test('marks rise within an epoch, and a new epoch makes poisoned numbers worthless', () => {
  let marks: HighWater = [];
  expect(standing(marks, 1, 1)).toBe('above');
  marks = raised(marks, 1, Number.MAX_SAFE_INTEGER);
  expect(standing(marks, 1, Number.MAX_SAFE_INTEGER)).toBe('at');
  expect(standing(marks, 1, 5)).toBe('below');
  expect(raised(marks, 1, 5)).toBe(marks);
  marks = raised(marks, 2, 1);
  expect(standing(marks, 2, 2)).toBe('above');
  expect(standing(marks, 1, Number.MAX_SAFE_INTEGER)).toBe('below');
});
