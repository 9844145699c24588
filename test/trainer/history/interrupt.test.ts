/** Real signals to a real process: it ends with the code of an interrupt, keeps its place, and goes on from there. */
import { execFile } from 'node:child_process';
import { existsSync, writeFileSync } from 'node:fs';
import { join } from 'node:path';
import { fileURLToPath } from 'node:url';
import { expect, it } from 'vitest';
import { watchSignals } from '../../../trainer/history/interrupt.ts';
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
  for (const signal of ['SIGINT', 'SIGTERM']) {
    const stopped = await read(history, place, signal);
    expect(stopped).toEqual({ code: 130, told: { message: 'Interrupted; the same command goes on from here.' } });
    expect(existsSync(place)).toBe(true);
    const { code, told } = await read(history, place);
    expect(code).toBe(0);
    expect(told).toEqual({ ...whole.told, said: [expect.stringMatching(/^Going on from where/)] });
    expect(existsSync(place)).toBe(false);
  }
});

it('gives the signals their usual meaning back', () => {
  const before = process.listenerCount('SIGINT');
  const watch = watchSignals();
  expect(process.listenerCount('SIGINT')).toBe(before + 1);
  expect(watch.isAsked).toBe(false);
  watch.end();
  expect(process.listenerCount('SIGINT')).toBe(before);
});
