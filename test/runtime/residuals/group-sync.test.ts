import { expect, test } from 'vitest';
import type { Clock } from '../../../runtime/clock.ts';
import { GroupSync } from '../../../runtime/residuals/group-sync.ts';

interface Timer {
  at: number;
  work: () => void;
}

/** Time moves by `pass` alone; a sync takes `syncMs`, for ever where that is infinite. */
function world(syncMs = 3) {
  let now = 0;
  const timers = new Set<Timer>();
  const starts: number[] = [];
  const after = (ms: number, work: () => void) => {
    const timer = { at: now + ms, work };
    timers.add(timer);
    return () => void timers.delete(timer);
  };
  const clock: Clock = { wall: () => now, monotonic: () => now, after };
  const sync = (): Promise<void> => {
    starts.push(now);
    return new Promise((resolve) => void after(syncMs, resolve));
  };
  const pass = async (ms: number): Promise<void> => {
    for (const end = now + ms; ; ) {
      const next = [...timers].sort((a, b) => a.at - b.at)[0];
      if (next === undefined || next.at > end) {
        now = end;
        return;
      }
      now = next.at;
      timers.delete(next);
      next.work();
      for (let i = 0; i < 5; i++) await Promise.resolve();
    }
  };
  const group = new GroupSync({ clock, sync });
  let released = 0;
  const wait = (): void => void group.wait().then(() => released++);
  return { group, pass, wait, starts, released: () => released, now: () => now };
}

test('a burst costs one sync, 200 ms after its first', async () => {
  const w = world();
  for (let i = 0; i < 8; i++) w.wait();
  await w.pass(199);
  expect(w.starts).toEqual([]);
  await w.pass(3);
  expect(w.released()).toBe(0);
  await w.pass(1);
  expect(w.starts).toEqual([200]);
  expect(w.released()).toBe(8);
});

test('ten do not wait for the time', async () => {
  const w = world();
  for (let i = 0; i < 10; i++) w.wait();
  await w.pass(3);
  expect(w.starts).toEqual([0]);
  expect(w.released()).toBe(10);
});

test('who comes while a sync runs is not covered by it', async () => {
  const w = world();
  for (let i = 0; i < 10; i++) w.wait();
  await w.pass(1);
  w.wait();
  await w.pass(2);
  expect(w.released()).toBe(10);
  await w.pass(203);
  expect(w.starts).toHaveLength(2);
  expect(w.released()).toBe(11);
});

test.each([1, 2, 6, 20])(
  'a sender that holds %i unacknowledged messages at most is not made to wait each time',
  async (most) => {
    const w = world(1);
    let sent = 0;
    for (let ms = 0; ms < 1000; ms++) {
      for (; sent - w.released() < most; sent++) w.wait();
      await w.pass(1);
    }
    expect(w.released()).toBeGreaterThan(most * 100);
  },
);

test('steady traffic causes at most five syncs a second', async () => {
  const w = world();
  for (let ms = 0; ms < 10_000; ms += 37) {
    w.wait();
    await w.pass(37);
  }
  expect(w.starts.length).toBeLessThanOrEqual(55);
});

test('a disk that hangs is not waited for longer than five seconds, whoever comes', async () => {
  const w = world(Number.POSITIVE_INFINITY);
  for (let i = 0; i < 10; i++) w.wait();
  await w.pass(100);
  w.wait();
  await w.pass(4899);
  expect(w.released()).toBe(0);
  await w.pass(1);
  expect(w.released()).toBe(10);
  await w.pass(100);
  expect(w.released()).toBe(11);
});

test('release lets those go who gather', async () => {
  const w = world();
  w.wait();
  w.group.release();
  await w.pass(1000);
  expect(w.released()).toBe(1);
  expect(w.starts).toEqual([]);
});
