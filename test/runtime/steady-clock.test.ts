import { describe, expect, test } from 'vitest';
import { CLOCK_UNSET_MS, SteadyClock } from '../../runtime/steady-clock.ts';
import { FakeClock } from '../support/fake-clock.ts';

const START = Date.UTC(2026, 2, 1);
const DAY = 24 * 3_600_000;

/** Lets `seconds` pass, asking for the time each second; the last answer. */
function pass(fake: FakeClock, steady: SteadyClock, seconds: number): number {
  for (let i = 0; i < seconds; i++) {
    fake.pass(1000);
    steady.wall();
  }
  return steady.wall();
}

function begun(wallMs = START): { fake: FakeClock; steady: SteadyClock; steps: number[] } {
  const fake = new FakeClock(wallMs);
  const steady = new SteadyClock(fake);
  const steps: number[] = [];
  steady.onStep = (stepMs) => steps.push(stepMs);
  return { fake, steady, steps };
}

describe.each([
  ['a day ahead', DAY],
  ['a day back', -DAY],
  ['a minute ahead', 60_000],
  ['a minute back', -60_000],
])('a step of %s', (_, step) => {
  test('taken back before it is believed leaves time as it was', () => {
    const { fake, steady, steps } = begun();
    pass(fake, steady, 100);
    fake.step(step);
    expect(pass(fake, steady, 15)).toBe(START + 115_000);
    expect(steady.doubtMs).toBe(step);
    fake.step(-step);
    expect(pass(fake, steady, 100)).toBe(START + 215_000);
    expect(steady.doubtMs).toBe(0);
    expect(steps).toEqual([]);
    expect(steady.counts).toEqual({ steps_ahead: 0, steps_back: 0, steps_passed_over: 1 });
  });

  test('that lasts is believed and told once', () => {
    const { fake, steady, steps } = begun();
    fake.step(step);
    expect(pass(fake, steady, 25)).toBe(START + 25_000 + step);
    expect(steps).toEqual([step]);
    expect(steady.counts).toMatchObject({ steps_ahead: step > 0 ? 1 : 0, steps_back: step > 0 ? 0 : 1 });
  });
});

test('a clock that keeps stepping is not believed, and time goes on evenly', () => {
  const { fake, steady, steps } = begun();
  for (let n = 0; n < 30; n++) {
    fake.step(n % 2 === 0 ? DAY : -2 * DAY);
    expect(pass(fake, steady, 10)).toBe(START + 10_000 * (n + 1));
  }
  expect(steps).toEqual([]);
});

test('a repeated second, as POSIX time has it for 23:59:60, and a slewed clock are followed and counted as nothing', () => {
  const { fake, steady, steps } = begun();
  fake.step(-1000);
  expect(pass(fake, steady, 10)).toBe(START + 9000);
  for (let n = 0; n < 10_000; n++) {
    fake.pass(1000);
    fake.step(0.5);
    steady.wall();
  }
  expect(steady.wall()).toBe(fake.wall());
  expect(steps).toEqual([]);
  expect(steady.counts).toEqual({ steps_ahead: 0, steps_back: 0, steps_passed_over: 0 });
});

test('a clock that was never set is set within half a minute, and never unset again', () => {
  const { fake, steady, steps } = begun(0);
  expect(pass(fake, steady, 600)).toBe(600_000);
  fake.step(START);
  expect(pass(fake, steady, 30)).toBe(START + 630_000);
  expect(steps).toEqual([]);
  fake.step(-START);
  const end = pass(fake, steady, 3600);
  expect(end).toBe(START + 4_230_000);
  expect(end).toBeGreaterThan(CLOCK_UNSET_MS);
  expect(steady.doubtMs).toBe(-START);
});
