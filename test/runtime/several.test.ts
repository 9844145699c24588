/** Several sites in one process: each alone with its folder, and none the worse for what happens to another. */
import { spawn } from 'node:child_process';
import { existsSync, mkdirSync, readdirSync, renameSync, writeFileSync } from 'node:fs';
import { join } from 'node:path';
import { fileURLToPath } from 'node:url';
import { formatKey, type HealthMessage, parseSite, publicHalf, type Site } from '@stillwell/protocol';
import { openConnection } from '@stillwell/runtime/mqtt';
import { expect, onTestFinished, test } from 'vitest';
import { type Clock, systemClock } from '../../runtime/clock.ts';
import type { GatewayConfig } from '../../runtime/config.ts';
import { dataFolderOf, usedFolders } from '../../runtime/data-folders.ts';
import { type Disk, nodeDisk } from '../../runtime/disk.ts';
import type { Gateway } from '../../runtime/gateway.ts';
import type { Log } from '../../runtime/log.ts';
import { Several } from '../../runtime/several.ts';
import { startAedes } from '../support/broker.ts';
import { expectRefusal, run } from '../support/cli.ts';
import { testFolder } from '../support/folder.ts';
import { author, FIRST_TICK, plantMessages, SITE_NAME, SITE_TEXT, sealedOf, trusted } from '../support/running-site.ts';
import { until } from '../support/until.ts';

const COMMAND = fileURLToPath(new URL('../../runtime/stillwell-gateway.js', import.meta.url));
const OTHER_TEXT = SITE_TEXT.replace(`site: ${SITE_NAME}`, 'site: reed-bank');
const plant = plantMessages(62);
const SITES = [parseSite(SITE_TEXT), parseSite(OTHER_TEXT)];

function configOf(site: Site, url: string, data: string): GatewayConfig {
  return {
    site,
    gateway: 'g1',
    data,
    broker: { url, protocol: 'auto', username: null, password: null, tls: {} },
    trusted,
    clock: 'readings',
    segmentTicks: 20,
    spoolBytes: 1e8,
    healthSeconds: 60,
  };
}

function linesOf<T>(out: string): T[] {
  return out
    .trim()
    .split('\n')
    .map((line) => JSON.parse(line) as T);
}

/** A disk that is full for one folder while `isFull` says so. */
function fullFor(folder: string, isFull: () => boolean): Disk {
  return {
    ...nodeDisk,
    openAppend: (path, keepBytes) => {
      const file = nodeDisk.openAppend(path, keepBytes);
      return {
        append: (bytes) => {
          if (isFull() && path.startsWith(folder)) throw Object.assign(new Error('ENOSPC'), { code: 'ENOSPC' });
          file.append(bytes);
        },
        sync: () => file.sync(),
        syncSoon: () => file.syncSoon(),
        close: () => file.close(),
      };
    },
  };
}

test('a fault in one site stops no other, and that site starts anew from its folder', async () => {
  const broker = await startAedes();
  onTestFinished(() => broker.stop());
  const data = testFolder();
  const said: string[] = [];
  let isFull = false;
  // The log lies on the same full disk, and throws in the midst of a pulse, where nobody waits for it.
  const say = (text: string): void => {
    said.push(text);
    if (isFull && text.includes('nothing is being kept')) throw new Error('the log takes nothing');
  };
  const log: Log = { debug: () => {}, info: say, warn: say, error: say };
  const clock: Clock = {
    ...systemClock,
    after: (ms, work) => systemClock.after([5000, 10_000, 20_000].includes(ms) ? 200 : ms, work),
  };
  const jobs = SITES.map((site) => ({ config: configOf(site, broker.url, join(data, site.site)), bundles: [] }));
  for (const { config } of jobs) mkdirSync(config.data);
  const started: Gateway[] = [];
  const disk = fullFor(join(data, 'reed-bank'), () => isFull);
  const several = new Several(jobs, {
    ports: { clock, disk, log, firstRetryMs: 60, willDelaySeconds: 0 },
    onGateway: (gateway) => started.push(gateway),
    offer: () => {},
  });
  onTestFinished(() => several.abandon());
  const plc = openConnection({ url: broker.url, clientId: 'plc', protocol: 'auto' });
  onTestFinished(() => plc.end(true));
  await plc.firstConnect(5000);
  const play = async (from: number, to: number): Promise<void> => {
    for (const { topic, payload } of plant.slice(from, to).flat())
      await plc.publish({ topic, payload, qos: 1, retain: false });
  };
  const reached = (gateway: Gateway, tick: number): boolean =>
    (gateway.engine.aligner.nextTick ?? 0) >= FIRST_TICK + tick;
  await until('both connected', () => several.gateways.every((gateway) => gateway.isConnected));
  await play(0, 30);
  await until('both at work', () => several.gateways.every((gateway) => reached(gateway, 28)));
  isFull = true;
  await play(30, 32);
  await until('one has failed', () => said.some((text) => text.includes('failed')));
  expect(several.gateways.map(({ config }) => config.site.site)).toEqual([SITE_NAME]);
  isFull = false;
  expect(said.find((text) => text.includes('failed'))).toContain(
    'reed-bank: failed: the log takes nothing; other sites go on',
  );
  await until('it has started anew', () => started.length === 3 && started[2]!.isConnected);
  await play(32, 60);
  await until('both at work again', () => several.gateways.every((gateway) => reached(gateway, 58)), 15_000);
  expect(several.gateways).toEqual([started[0], started[2]]);
  await several.stop();
  for (const { config } of jobs) {
    expect(existsSync(join(config.data, 'lock'))).toBe(false);
    expect(readdirSync(join(config.data, 'spool')).length).toBeGreaterThanOrEqual(2);
  }
});

test('a site that cannot start lets none start, and leaves no lock', async () => {
  const data = testFolder();
  const jobs = SITES.map((site) => ({
    config: configOf(site, 'mqtt://127.0.0.1:1', join(data, site.site)),
    bundles: [],
  }));
  for (const { config } of jobs) mkdirSync(config.data);
  writeFileSync(
    join(data, 'reed-bank', 'identity.json'),
    '{"site": "another", "gateway": "g1", "stream": "0011223344556677"}',
  );
  const quiet: Log = { debug: () => {}, info: () => {}, warn: () => {}, error: () => {} };
  const options = { ports: { clock: systemClock, disk: nodeDisk, log: quiet }, offer: () => {} };
  expect(() => new Several(jobs, options)).toThrow(/reed-bank: expected site reed-bank, gateway g1, got another/);
  await until('no lock', () => jobs.every(({ config }) => !existsSync(join(config.data, 'lock'))));
});

test('one site has the folder to itself, several have one each, and keep it', () => {
  const data = testFolder();
  const own = join(data, 'a');
  expect(dataFolderOf(nodeDisk, data, 'a', 1)).toBe(data);
  expect(dataFolderOf(nodeDisk, data, 'a', 2)).toBe(own);
  mkdirSync(own);
  writeFileSync(join(own, 'identity.json'), '{}');
  expect(dataFolderOf(nodeDisk, data, 'a', 1)).toBe(own);
  expect(dataFolderOf(nodeDisk, data, 'b', 1)).toBe(data);
  expect(usedFolders(nodeDisk, data)).toEqual([own]);
  renameSync(join(own, 'identity.json'), join(data, 'identity.json'));
  expect(usedFolders(nodeDisk, data)).toEqual([data]);
  expect(() => dataFolderOf(nodeDisk, data, 'a', 2)).toThrow(/got that of a single gateway; move what is in it/);
});

test('one process serves two sites: bundles find theirs, status tells of both, a bad site file ends the start', async () => {
  const broker = await startAedes();
  onTestFinished(() => broker.stop());
  const folder = testFolder();
  const files = {
    'a.yaml': SITE_TEXT,
    'b.yaml': OTHER_TEXT,
    'bad.yaml': SITE_TEXT.replace('tick: 1min', 'tick: soon'),
  };
  for (const [name, text] of Object.entries(files)) writeFileSync(join(folder, name), text);
  writeFileSync(join(folder, 'author.pub'), formatKey(publicHalf(author)));
  writeFileSync(join(folder, 'b.swb'), sealedOf(1, { site: 'reed-bank' }));
  writeFileSync(join(folder, 'c.swb'), sealedOf(1, { site: 'elsewhere' }));
  const two = '--site a.yaml --site b.yaml --trust author.pub --data data';
  const start = `stillwell-gateway run ${two} --broker ${broker.url} --gateway g1`;
  await expectRefusal(start.replace('b.yaml', 'bad.yaml'), folder, [/bad\.yaml/, /tick/]);
  await expectRefusal(start.replace('b.yaml', 'a.yaml'), folder, [/a\.yaml and a\.yaml both are of site "marsh-lane"/]);
  await expectRefusal(`${start} --bundle c.swb`, folder, [
    /c\.swb/,
    /"elsewhere"/,
    /expected one for marsh-lane, reed-bank/,
  ]);
  const checkBoth = `stillwell-gateway check ${two.replace(' --data data', '')} --broker ${broker.url} --seconds 0 --json`;
  const checked = await run(`${checkBoth} --bundle b.swb`, folder);
  const found = linesOf<{ site: string; bundle: { sequence: number } | null }>(checked.out);
  expect(found.map(({ site, bundle }) => [site, bundle?.sequence])).toEqual([
    ['marsh-lane', undefined],
    ['reed-bank', 1],
  ]);
  const child = spawn(process.execPath, [COMMAND, ...start.split(' ').slice(1), '--bundle', 'b.swb'], { cwd: folder });
  onTestFinished(() => void child.kill('SIGKILL'));
  let out = '';
  child.stdout.on('data', (chunk) => {
    out += chunk;
  });
  await until('both connected', () => out.split('connected to the broker').length === 3, 60_000);
  expect(out).toContain('marsh-lane: no bundle yet: recording');
  expect(out).toContain('reed-bank: bundle b.swb changed');
  writeFileSync(join(folder, 'a.swb'), sealedOf(1));
  const loaded = await run(`stillwell-gateway load a.swb ${two}`, folder);
  expect(loaded.err).toBe('');
  expect(loaded.out).toContain('taken by the running gateway');
  const gone = new Promise((resolve) => child.once('exit', resolve));
  child.kill('SIGTERM');
  expect(await gone).toBe(0);
  const status = await run('stillwell-gateway status --data data --json', folder);
  const sites = linesOf<{ running: boolean; health: HealthMessage }>(status.out);
  expect(sites.map(({ running, health }) => [health.site, health.status, health.sequence, running])).toEqual([
    ['marsh-lane', 'stopped', 1, false],
    ['reed-bank', 'stopped', 1, false],
  ]);
}, 180_000);
