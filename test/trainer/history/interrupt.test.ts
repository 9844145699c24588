/** Real signals to a real process: it ends with the code of an interrupt, keeps its place, and goes on from there. */
import { execFile } from 'node:child_process';
import { EventEmitter } from 'node:events';
import { existsSync, writeFileSync } from 'node:fs';
import { join } from 'node:path';
import { fileURLToPath } from 'node:url';
import { describe, expect, it } from 'vitest';
import { type SignalPort, watchSignals } from '../../../trainer/history/interrupt.ts';
import { testFolder } from '../../support/folder.ts';
import { rows, wideCsv } from './long-support.ts';

const CHILD = fileURLToPath(new URL('./interrupt-child.mjs', import.meta.url));

function read(...args: string[]): Promise<{ code: number; told: Record<string, unknown> }> {
  return new Promise((resolve) => {
    execFile(process.execPath, [CHILD, ...args], { timeout: 60_000 }, (error, out, err) => {
      expect(err).toBe('');
      resolve({ code: error === null ? 0 : Number(error.code), told: JSON.parse(out) as Record<string, unknown> });
    });
  });
}

it('ends with 130 and one sentence, and the same command goes on', async () => {
  const folder = testFolder();
  const history = join(folder, 'h.csv');
  const place = join(folder, 'out', 'place');
  writeFileSync(history, wideCsv(rows(600)));
  const whole = await read(history, place);
  expect(whole).toMatchObject({ code: 0, told: { said: [] } });
  // A key pressed twice, or a signal handed on twice, is one wish: the place is kept all the same.
  for (const signals of [['SIGINT'], ['SIGTERM'], ['SIGINT', 'SIGINT'], ['SIGINT', 'SIGTERM', 'SIGINT']]) {
    const stopped = await read(history, place, ...signals);
    expect(stopped).toEqual({ code: 130, told: { message: 'Interrupted; the same command goes on from here.' } });
    expect(existsSync(place)).toBe(true);
    const { code, told } = await read(history, place);
    expect(code).toBe(0);
    expect(told).toEqual({ ...whole.told, said: [expect.stringMatching(/^Going on from where/)] });
    expect(existsSync(place)).toBe(false);
  }
});

/** A process whose signals, clock and end are the test's. */
class Process extends EventEmitter implements SignalPort {
  ms = 0;
  readonly said: string[] = [];
  readonly ended: number[] = [];
  nowMs(): number {
    return this.ms;
  }
  say(sentence: string): void {
    this.said.push(sentence);
  }
  exit(code: number): void {
    this.ended.push(code);
  }
}

describe('asked again', () => {
  it.each(['SIGINT', 'SIGTERM'])(
    '%s within two seconds is the same wish; later it ends at once and says what is lost',
    (signal) => {
      const process = new Process();
      const watch = watchSignals(process);
      expect(watch.isAsked).toBe(false);
      process.ms = 5000;
      for (const ms of [5000, 5050, 6999]) {
        process.ms = ms;
        process.emit(signal);
        expect(watch.isAsked).toBe(true);
      }
      expect(process.ended).toEqual([]);
      process.ms = 7000;
      process.emit('SIGINT');
      expect(process.ended).toEqual([130]);
      expect(process.said).toEqual([
        'stillwell: Ended before the place could be kept; the same command goes on from the last place kept on the way, and begins anew where there is none.',
      ]);
    },
  );

  it('once the place is kept, nothing is lost and nothing said', () => {
    const process = new Process();
    const watch = watchSignals(process);
    process.emit('SIGINT');
    watch.kept();
    process.ms = 60;
    process.emit('SIGINT');
    expect(process.ended).toEqual([]);
    process.ms = 9000;
    process.emit('SIGINT');
    expect(process).toMatchObject({ ended: [130], said: [] });
  });
});

it('gives the signals their usual meaning back', () => {
  const process = new Process();
  const watch = watchSignals(process);
  expect(process.eventNames()).toEqual(['SIGINT', 'SIGTERM']);
  watch.end();
  expect(process.eventNames()).toEqual([]);
});

it('listens to the process itself where nothing else is said', () => {
  const before = process.listenerCount('SIGINT');
  const watch = watchSignals();
  expect(process.listenerCount('SIGINT')).toBe(before + 1);
  watch.end();
  expect(process.listenerCount('SIGINT')).toBe(before);
});
