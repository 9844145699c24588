/** The command line as people meet it: every bad input is one line and exit code 2, nothing half-written. */
import { execFile, spawn } from 'node:child_process';
import { existsSync, mkdirSync, readFileSync, writeFileSync } from 'node:fs';
import { join } from 'node:path';
import { fileURLToPath } from 'node:url';
import { createKeyPair, formatKey, publicHalf } from '@stillwell/protocol';
import type { Command } from 'commander';
import { afterEach, beforeEach, describe, expect, test } from 'vitest';
import { checkCommand } from '../../runtime/commands/check.ts';
import { loadCommand } from '../../runtime/commands/load.ts';
import { runCommand } from '../../runtime/commands/run.ts';
import { statusCommand } from '../../runtime/commands/status.ts';
import { isRefusal } from '../../runtime/config.ts';
import { openConnection } from '../../runtime/mqtt/connection.ts';
import { freePort, startAedes, type TestBroker } from '../support/broker.ts';
import { testFolder } from '../support/folder.ts';
import { author, plantMessages, SITE_TEXT, sealedOf } from '../support/running-site.ts';
import { until } from '../support/until.ts';

const COMMAND = fileURLToPath(new URL('../../runtime/stillwell-gateway.js', import.meta.url));
const PATIENCE_MS = 60_000;

interface Ran {
  code: number;
  out: string;
  err: string;
}

function run(...args: string[]): Promise<Ran> {
  return new Promise((resolve) => {
    execFile(process.execPath, [COMMAND, ...args], { timeout: PATIENCE_MS }, (error, out, err) =>
      resolve({ code: typeof error?.code === 'number' ? error.code : error ? -1 : 0, out, err }),
    );
  });
}

let folder: string;
let broker: TestBroker;
const at = (name: string): string => join(folder, name);

beforeEach(async () => {
  folder = testFolder();
  writeFileSync(at('site.yaml'), SITE_TEXT);
  writeFileSync(at('author.pub'), formatKey(publicHalf(author)));
  writeFileSync(at('other.pub'), formatKey(publicHalf(createKeyPair(new Uint8Array(32).fill(8)))));
  writeFileSync(at('rollout.pub'), formatKey(publicHalf(createKeyPair(new Uint8Array(32).fill(9), 'rollout'))));
  writeFileSync(at('first.swb'), sealedOf(1));
  broker = await startAedes();
});
afterEach(() => broker.stop());

const site = () => ['--site', at('site.yaml'), '--trust', at('author.pub')];
const data = () => ['--data', at('data')];
const url = () => ['--broker', broker.url];

/** One line, no stack trace, exit code 2. */
function expectRefused(ran: Ran, words: RegExp): void {
  expect(ran.err).toMatch(words);
  expect(ran.err.trim().split('\n')).toHaveLength(1);
  expect(ran.code).toBe(2);
}

/** The same inside this process, where it is quicker: what the command line turns into one line and exit code 2. */
async function refusalOf(command: Command, ...args: string[]): Promise<string> {
  const error = await command.parseAsync(args, { from: 'user' }).then(
    () => null,
    (thrown: unknown) => thrown,
  );
  if (!isRefusal(error)) throw new Error(`expected a refusal, got ${error}`);
  expect(error.message).not.toContain('\n');
  return error.message;
}

describe('refused with one line', () => {
  test('missing site file: exit code 2, and nothing is written', async () => {
    const ran = await run('run', '--site', at('none.yaml'), '--trust', at('author.pub'), ...data(), ...url());
    expectRefused(ran, /^stillwell-gateway: site file .*none\.yaml: no such file/);
    expect(existsSync(at('data'))).toBe(false);
  });

  test('a typo in a key of the site file, with the right one suggested', async () => {
    writeFileSync(at('site.yaml'), SITE_TEXT.replace('lateness:', 'latenes:'));
    expect(await refusalOf(checkCommand(), ...site(), ...url())).toMatch(/site\.yaml:6:1: .*latenes.*lateness/);
  });

  test('a cut bundle, one with a bit turned, and one by another key', async () => {
    const whole = readFileSync(at('first.swb'));
    writeFileSync(at('cut.swb'), whole.subarray(0, 900));
    const turned = Buffer.from(whole);
    turned[700]! ^= 2;
    writeFileSync(at('turned.swb'), turned);
    const load = (name: string) => refusalOf(loadCommand(), at(name), ...site(), ...data());
    expect(await load('cut.swb')).toMatch(/cut\.swb: refused \(envelope\): .*cut short/);
    expect(await load('turned.swb')).toMatch(/turned\.swb: refused \(digest\)/);
    const other = ['--site', at('site.yaml'), '--trust', at('other.pub'), ...data(), ...url(), '--log', 'silent'];
    expect(await refusalOf(runCommand(), ...other, '--bundle', at('first.swb'))).toMatch(/refused \(signature\)/);
    expect(existsSync(at('data'))).toBe(false);
  });

  test('no key, a rollout key, broken options, an unfit address', async () => {
    const check = (...args: string[]) => refusalOf(checkCommand(), ...args);
    expect(await check('--site', at('site.yaml'), ...url())).toMatch(/--trust: expected at least one/);
    expect(await check('--site', at('site.yaml'), '--trust', at('rollout.pub'), ...url())).toMatch(
      /rollout\.pub: expected an author key, got a rollout key/,
    );
    expect(await check(...site(), '--broker', 'http://localhost')).toMatch(/expected mqtt:\/\/ or mqtts:\/\//);
    const start = (...args: string[]) => refusalOf(runCommand(), ...site(), ...data(), ...url(), ...args);
    expect(await start('--clock', 'sundial')).toMatch(/--clock: expected wall or readings, got "sundial"/);
    expect(await start('--segment-ticks', '-1')).toMatch(/--segment-ticks: expected a whole number from 1/);
    expect(await start('--gateway', 'a/b')).toMatch(/--gateway "a\/b": expected/);
    expect(await start('--page', 'nowhere')).toMatch(/--page: expected off, a port, or host:port/);
    expect(existsSync(at('data'))).toBe(false);
  });

  test('check on a broker that is down, or refuses', async () => {
    const down = await freePort();
    expect(await refusalOf(checkCommand(), ...site(), '--broker', `mqtt://127.0.0.1:${down}`)).toMatch(
      /nothing listens there/,
    );
  });

  test('a data folder of another site, and status where no gateway ever ran', async () => {
    expect(await refusalOf(statusCommand(), ...data())).toMatch(/no status file/);
    mkdirSync(at('data'));
    writeFileSync(at('data/identity.json'), '{"site":"mill-road","gateway":"g9","stream":"0011223344556677"}');
    expect(await refusalOf(runCommand(), ...site(), ...data(), ...url(), '--log', 'silent')).toMatch(
      /expected site marsh-lane, gateway .*, got mill-road, g9/,
    );
  });
});

test('check says which signals were heard', async () => {
  const plant = openConnection({ url: broker.url, clientId: 'plant', protocol: 'auto' });
  await plant.firstConnect(5000);
  for (const { topic, payload } of plantMessages(1, 3, 0)[0]!.slice(0, 1))
    await plant.publish({ topic, payload, qos: 1, retain: true });
  await plant.publish({ topic: 'plant/flow', payload: 'wet', qos: 1, retain: true });
  await plant.publish({ topic: 'plant/pmup', payload: '1', qos: 1, retain: true });
  const { code, out } = await run('check', ...site(), ...url(), '--bundle', at('first.swb'), '--seconds', '1');
  const around = await run('check', ...site(), ...url(), '--seconds', '1', '--around', 'plant/#', '--json');
  await plant.end();
  expect(out).toMatch(/^bundle {4}[0-9a-f]{16}…, sequence 1: every check passed$/m);
  expect(out).toMatch(
    /^level +1, 1\/s +-?\d[\d.]* \S+ +\d.* (?:ago|ahead), own time, kept by the broker +plant\/level$/m,
  );
  expect(out).toMatch(/^flow +- +- +- +plant\/flow\n {2}refused 1 × syntax: payload: expected JSON text, got "wet"$/m);
  expect(out).toMatch(/^pump +- +- +- +plant\/pump$/m);
  const { heard, unmatched, refused_filters: refused } = JSON.parse(around.out) as Record<string, { hint?: string }[]>;
  expect(heard!.map(({ hint }) => hint)).toEqual([null, null, 'did you mean plant/pmup?']);
  expect(unmatched).toEqual([{ topic: 'plant/pmup', count: 1, example: '1' }]);
  expect(refused).toEqual([]);
  expect(code).toBe(0);
});

test('run keeps trying a broker that is down, is alone in its folder, takes a bundle by load, and stops in time', async () => {
  const port = await freePort();
  const page = await freePort();
  const where = ['--broker', `mqtt://127.0.0.1:${port}`, '--page', String(page)];
  const args = ['run', ...site(), ...data(), ...where, '--gateway', 'g1'];
  const child = spawn(process.execPath, [COMMAND, ...args]);
  let out = '';
  child.stdout.on('data', (chunk) => {
    out += chunk;
  });
  const exited = new Promise<number | null>((resolve) => child.once('exit', (code) => resolve(code)));
  try {
    await until('says that the broker is down', () => out.includes('nothing listens there'), PATIENCE_MS);
    expectRefused(await run(...args), new RegExp(`process ${child.pid} uses it already`));
    const loaded = await run('load', at('first.swb'), ...site(), ...data());
    expect(loaded).toMatchObject({ code: 0, err: '' });
    expect(loaded.out).toMatch(/taken by the running gateway/);
    await until('said in the log', () => out.includes('changed: '), PATIENCE_MS);
    expect(out).toContain(`page: http://127.0.0.1:${page}/`);
    const alive = await fetch(`http://127.0.0.1:${page}/healthz`);
    expect(await alive.json()).toMatchObject({ alive: true });
    const before = Date.now();
    child.kill('SIGTERM');
    expect(await exited).toBe(0);
    expect(Date.now() - before).toBeLessThan(2000);
  } finally {
    child.kill('SIGKILL');
  }
  const status = await run('status', ...data());
  expect(status.out).toMatch(/^process {3}not running$/m);
  expect(status.out).toMatch(/^said {6}stopped at /m);
  writeFileSync(at('second.swb'), sealedOf(2, { seed: 2 }));
  const stored = await run('load', at('second.swb'), ...site(), ...data());
  expect(stored.out).toMatch(/stored .*sequence 2/);
}, 120_000);

test('a lock left by a process that is gone does not keep the next one out', async () => {
  const { takeLock, lockHolder } = await import('../../runtime/lock.ts');
  writeFileSync(at('lock'), JSON.stringify({ pid: process.pid, started: 'another boot:1' }));
  const unlock = takeLock(folder);
  expect(lockHolder(folder)).toBe(process.pid);
  expect(() => takeLock(folder)).toThrow(/uses it already/);
  unlock();
  expect(lockHolder(folder)).toBeNull();
});

test('a failure where nobody waits for it ends in one line, without a stack, and the lock is free again', async () => {
  const preload = `import{existsSync}from'node:fs';const t=setInterval(()=>{if(existsSync(${JSON.stringify(at('now'))})){clearInterval(t);throw new Error('planted failure')}},20)`;
  const args = ['run', ...site(), ...data(), ...url(), '--gateway', 'g1'];
  const child = spawn(process.execPath, [
    '--import',
    `data:text/javascript,${encodeURIComponent(preload)}`,
    COMMAND,
    ...args,
  ]);
  let out = '';
  let err = '';
  child.stdout.on('data', (chunk) => {
    out += chunk;
  });
  child.stderr.on('data', (chunk) => {
    err += chunk;
  });
  const exited = new Promise<number | null>((resolve) => child.once('exit', (code) => resolve(code)));
  try {
    await until('waits for a bundle', () => out.includes('no bundle yet'), PATIENCE_MS);
    writeFileSync(at('now'), '');
    expect(await exited).toBe(1);
  } finally {
    child.kill('SIGKILL');
  }
  expect(err).toBe('stillwell-gateway: planted failure\n');
  expect(existsSync(at('data/lock'))).toBe(false);
}, 120_000);
