/** A loop that hangs for ever is ended from beside it, and what it hung at is on disk; one that works is left alone. */
import { spawn } from 'node:child_process';
import { chmodSync, existsSync, readFileSync, writeFileSync } from 'node:fs';
import { join } from 'node:path';
import { fileURLToPath, pathToFileURL } from 'node:url';
import { expect, test } from 'vitest';
import { nodeDisk } from '../../runtime/disk.ts';
import type { Log } from '../../runtime/log.ts';
import { tellOfHang } from '../../runtime/watchdog.ts';
import { testFolder } from '../support/folder.ts';

const DIST = fileURLToPath(new URL('../../runtime/dist', import.meta.url));
const WATCHDOG = pathToFileURL(join(DIST, 'watchdog.js')).href;
const PATIENCE_MS = 60_000;

/** A program that is watched at short times; `body` has `folder` and a `stop` that ends the watch. */
function programOf(folder: string, body: string): string {
  const file = join(folder, 'program.mjs');
  writeFileSync(
    file,
    `import { watchThisLoop } from ${JSON.stringify(WATCHDOG)};
const log = { debug() {}, info() {}, warn: console.error, error: console.error };
const stop = watchThisLoop(${JSON.stringify(folder)}, log, { beatMs: 20, lookMs: 100 });
function decodePlanted() { for (let n = 0; ; n++) if (n < 0) break; }
${body}
`,
  );
  return file;
}

function run(file: string): Promise<{ code: number | null; signal: string | null; said: string }> {
  const child = spawn(process.execPath, [file], { stdio: ['ignore', 'pipe', 'pipe'] });
  let said = '';
  for (const stream of [child.stdout, child.stderr])
    stream.on('data', (chunk) => {
      said += chunk;
    });
  return new Promise((resolve) => child.once('exit', (code, signal) => resolve({ code, signal, said })));
}

function recordIn(folder: string): { stack: { function: string; at: string }[]; silent_s: number } {
  return JSON.parse(readFileSync(join(folder, 'hang.json'), 'utf8'));
}

test('an endless loop is ended, and its call stack says where it was', { timeout: PATIENCE_MS }, async () => {
  const folder = testFolder();
  const ended = await run(programOf(folder, 'setTimeout(function onMessage() { decodePlanted(); }, 300);'));
  expect(ended).toMatchObject({ signal: 'SIGKILL', said: '' });
  const { stack, silent_s } = recordIn(folder);
  expect(stack.slice(0, 2).map((line) => line.function)).toEqual(['decodePlanted', 'onMessage']);
  expect(stack[0]!.at).toMatch(/program\.mjs:\d+:\d+$/);
  expect(silent_s).toBe(0.6);
});

test('a call of the system that does not return is ended as well', { timeout: PATIENCE_MS }, async () => {
  const folder = testFolder();
  const wait = `import('node:child_process').then((m) => m.execFileSync('sleep', ['600']))`;
  const ended = await run(programOf(folder, `setTimeout(() => ${wait}, 300);`));
  expect(ended.signal).toBe('SIGKILL');
  expect(recordIn(folder).stack).toEqual([]);
});

test('short work is left alone, and the watch keeps no process from ending', { timeout: PATIENCE_MS }, async () => {
  const folder = testFolder();
  const work = 'let n = 0; const t = setInterval(() => { if (++n > 30) { clearInterval(t); } }, 50);';
  expect(await run(programOf(folder, work))).toEqual({ code: 0, signal: null, said: '' });
  const stopped = `await stop(); const until = Date.now() + 2000; while (Date.now() < until); console.log('done');`;
  expect(await run(programOf(folder, stopped))).toEqual({ code: 0, signal: null, said: 'done\n' });
  expect(existsSync(join(folder, 'hang.json'))).toBe(false);
});

test('the next start says it once', () => {
  const folder = testFolder();
  const said: string[] = [];
  const keep = (text: string): void => void said.push(text);
  const log: Log = { debug: keep, info: keep, warn: keep, error: keep };
  const record = { at: '2026-03-01T00:00:00.000Z', silent_s: 24, stack: [{ function: 'fold', at: 'x:1:1' }] };
  writeFileSync(join(folder, 'hang.json'), JSON.stringify(record));
  tellOfHang(nodeDisk, folder, log);
  tellOfHang(nodeDisk, folder, log);
  expect(said).toEqual([
    expect.stringMatching(/hung and was ended: at 2026-.*, silent for 24 s, in fold; .*hang-told/),
  ]);
  writeFileSync(join(folder, 'hang.json'), 'torn');
  tellOfHang(nodeDisk, folder, log);
  expect(said[1]).toMatch(/not readable/);
});

test('systemd hears that it is ready, alive, and stopping', { timeout: PATIENCE_MS }, async () => {
  const folder = testFolder();
  const heard = join(folder, 'heard');
  writeFileSync(join(folder, 'systemd-notify'), `#!/bin/sh\necho "$NOTIFY_SOCKET $*" >> ${heard}\n`);
  chmodSync(join(folder, 'systemd-notify'), 0o755);
  const notice = pathToFileURL(join(DIST, 'service-notice.js')).href;
  const file = join(folder, 'service.mjs');
  const environment = `{ PATH: ${JSON.stringify(`${folder}:/usr/bin:/bin`)}, NOTIFY_SOCKET: '/run/n', WATCHDOG_USEC: '300000' }`;
  writeFileSync(
    file,
    `import { existsSync, readFileSync } from 'node:fs';
import { openServiceNotice } from ${JSON.stringify(notice)};
const notice = openServiceNotice(${environment}, { error: console.error });
notice.ready();
const t = setInterval(() => {
  if (!existsSync(${JSON.stringify(heard)}) || readFileSync(${JSON.stringify(heard)}, 'utf8').split('\\n').length < 4) return;
  clearInterval(t);
  notice.stopping();
}, 20);
openServiceNotice({}, {}).ready();
`,
  );
  expect(await run(file)).toEqual({ code: 0, signal: null, said: '' });
  const lines = readFileSync(heard, 'utf8').trim().split('\n');
  expect(lines[0]).toBe('/run/n --ready');
  expect(lines.slice(1, 3)).toEqual(['/run/n WATCHDOG=1', '/run/n WATCHDOG=1']);
  expect(lines.at(-1)).toBe('/run/n STOPPING=1');
});
