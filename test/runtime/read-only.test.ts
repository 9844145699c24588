/** A data folder from before, on a file system that can only be read now. */
import { mkdtempSync, rmSync, writeFileSync } from 'node:fs';
import { tmpdir } from 'node:os';
import { join } from 'node:path';
import { afterEach, expect, test } from 'vitest';
import { BundleKeeper } from '../../runtime/bundle/change.ts';
import { openDataFolder } from '../../runtime/data-folder.ts';
import { Engine } from '../../runtime/engine.ts';
import { type LockFiles, lockHolder, takeLock } from '../../runtime/lock.ts';
import { MemoryDisk } from '../support/memory-disk.ts';
import { FIRST_TICK, plantMessages, sealedOf, site, trusted } from '../support/running-site.ts';

const folders: string[] = [];
afterEach(() => {
  for (const folder of folders.splice(0)) rmSync(folder, { recursive: true });
});

function start(disk: MemoryDisk): Engine {
  const keeper = new BundleKeeper(disk, 'data', site, trusted);
  const options = { site, gateway: 'g1', disk, folder: 'data', segmentTicks: 20, spoolBytes: 1e9, note: () => {} };
  const engine = new Engine(options, keeper);
  if (engine.serving !== null) return engine;
  const offered = keeper.offer(sealedOf(1), null);
  if (offered.outcome !== 'accepted') throw new Error(offered.outcome);
  engine.install(offered.checked);
  keeper.serves(offered.checked);
  return engine;
}

function feed(engine: Engine, from: number, to: number): void {
  for (const message of plantMessages(60).slice(from, to).flat())
    engine.message(message.topic, message.payload, message.timeMs, null);
  engine.close((FIRST_TICK + to) * 60_000 + site.latenessMs);
  engine.settle();
}

test('is forecast from without a record, and recorded in again once it can be written', () => {
  const disk = new MemoryDisk();
  const before = start(disk);
  feed(before, 0, 30);
  before.stop();
  disk.fault = 'EROFS';
  disk.faultAt = disk.operations;
  expect(openDataFolder(disk, 'data')).toContain('read-only');
  const engine = start(disk);
  feed(engine, 30, 55);
  expect(engine.serving!.tick).toBe(FIRST_TICK + 54);
  expect(engine.journal.fault).toContain('EROFS');
  disk.repair();
  engine.settle(true);
  expect(engine.journal.fault).toBeNull();
  expect(openDataFolder(disk, 'data')).toBeNull();
});

test('is refused where it holds nothing, or where it is another fault that keeps from writing', () => {
  const disk = new MemoryDisk();
  disk.faultAt = disk.operations;
  disk.fault = 'EROFS';
  expect(() => openDataFolder(disk, 'data')).toThrow(/cannot be written \(EROFS\)/);
  const known = new MemoryDisk();
  start(known).stop();
  known.faultAt = known.operations;
  known.fault = 'EACCES';
  expect(() => openDataFolder(known, 'data')).toThrow(/cannot be written \(EACCES\)/);
});

test('needs no lock, but minds one that a living process has', () => {
  const folder = mkdtempSync(join(tmpdir(), 'stillwell-read-only-'));
  folders.push(folder);
  const refuse = (code: string) => (): never => {
    throw Object.assign(new Error(code), { code });
  };
  const readOnly: LockFiles = { create: refuse('EROFS'), remove: refuse('EROFS') };
  takeLock(folder, readOnly)();
  expect(lockHolder(folder)).toBeNull();
  // open(2) says EEXIST before EROFS.
  const left: LockFiles = { create: refuse('EEXIST'), remove: refuse('EROFS') };
  writeFileSync(join(folder, 'lock'), JSON.stringify({ pid: process.pid, started: 'another boot:1' }));
  takeLock(folder, left)();
  writeFileSync(join(folder, 'lock'), JSON.stringify({ pid: process.pid, started: '' }));
  expect(() => takeLock(folder, left)).toThrow(/uses it already/);
});
