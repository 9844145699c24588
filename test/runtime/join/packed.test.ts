/**
 * The gateway as it is shipped: the archive is unpacked where nothing of ours and no library is installed, and the one file
 * must be all it needs. It runs on a broker, as a service would start it, and is ended by its watch when it hangs.
 */
import { execFileSync, spawn } from 'node:child_process';
import {
  existsSync,
  mkdirSync,
  mkdtempSync,
  readdirSync,
  readFileSync,
  rmSync,
  statSync,
  writeFileSync,
} from 'node:fs';
import { tmpdir } from 'node:os';
import { join } from 'node:path';
import { fileURLToPath } from 'node:url';
import { formatKey, publicHalf } from '@stillwell/protocol';
import { afterAll, beforeAll, describe, expect, it } from 'vitest';
import { openConnection } from '../../../runtime/mqtt/connection.ts';
import { VERSION } from '../../../runtime/version.ts';
import { startAedes } from '../../support/broker.ts';
import { author, plantMessages, SITE_TEXT, sealedOf } from '../../support/running-site.ts';
import { until } from '../../support/until.ts';

const ROOT = fileURLToPath(new URL('../../..', import.meta.url));
const COMPILED = join(ROOT, 'runtime/dist/cli.js');
const PATIENCE_MS = 120_000;
let folder = '';
let home = '';
let archive = '';

beforeAll(() => {
  folder = mkdtempSync(join(tmpdir(), 'stillwell-gateway-'));
  const said = execFileSync(process.execPath, [join(ROOT, 'runtime/join/build.js'), join(folder, 'joined')], {
    encoding: 'utf8',
  });
  archive = said.trim();
  home = join(folder, 'home');
  mkdirSync(home);
  execFileSync('tar', ['-xzf', archive, '-C', home, '--strip-components', '1']);
  writeFileSync(join(folder, 'site.yaml'), SITE_TEXT);
  writeFileSync(join(folder, 'author.pub'), formatKey(publicHalf(author)));
  writeFileSync(join(folder, 'first.swb'), sealedOf(1));
}, PATIENCE_MS);
afterAll(() => rmSync(folder, { recursive: true, force: true }));

const program = (): string => join(home, 'stillwell-gateway.mjs');

function run(file: string, words: readonly string[]): { status: number; said: string } {
  try {
    const said = execFileSync(process.execPath, [file, ...words], { cwd: folder, encoding: 'utf8', stdio: 'pipe' });
    return { status: 0, said };
  } catch (error) {
    const { status, stdout, stderr } = error as { status: number; stdout: string; stderr: string };
    return { status, said: stdout + stderr };
  }
}

describe('the archive', () => {
  it('holds one program, the licences of what is in it, the unit, the page, and depends on nothing', () => {
    expect(readdirSync(home).sort()).toEqual([
      'LICENSE',
      'LICENSES.txt',
      'install.md',
      'package.json',
      'stillwell-gateway.mjs',
      'stillwell-gateway.service',
    ]);
    const manifest = JSON.parse(readFileSync(join(home, 'package.json'), 'utf8'));
    expect(manifest).toMatchObject({ name: 'stillwell-gateway', version: VERSION, license: 'MIT' });
    expect(manifest).not.toHaveProperty('dependencies');
    const notices = readFileSync(join(home, 'LICENSES.txt'), 'utf8');
    for (const name of ['zod', 'commander', 'msgpackr', 'yaml', 'pino', 'mqtt', 'mqtt-packet'])
      expect(notices, name).toMatch(new RegExp(`^${name} \\d[\\s\\S]*?(MIT|ISC|Permission)`, 'm'));
    expect(notices).not.toMatch(/^(ml-matrix|vite|msgpackr-extract) \d/m);
  });

  it('starts with the flags of the launcher, and may be executed', () => {
    const first = (file: string): string => readFileSync(file, 'utf8').split('\n', 1)[0]!;
    expect(first(program())).toBe(first(join(ROOT, 'runtime/stillwell-gateway.js')));
    expect(statSync(program()).mode & 0o111).toBe(0o111);
    expect(execFileSync(program(), ['--version'], { encoding: 'utf8' })).toBe(`${VERSION}\n`);
  });

  it(
    'is installed by npm without a network',
    () => {
      const prefix = join(folder, 'prefix');
      const words = ['install', '--global', '--offline', '--no-audit', '--no-fund', '--prefix', prefix, archive];
      execFileSync('npm', words, { cwd: folder, stdio: 'pipe', env: { ...process.env, HOME: folder } });
      const command = join(prefix, 'bin/stillwell-gateway');
      expect(execFileSync(command, ['--version'], { encoding: 'utf8' })).toBe(`${VERSION}\n`);
    },
    PATIENCE_MS,
  );
});

describe('the one file', { timeout: PATIENCE_MS }, () => {
  it('says what the compiled program says, refusals among it', () => {
    writeFileSync(join(folder, 'typo.yaml'), SITE_TEXT.replace('lateness:', 'latenes:'));
    const site = (file: string): string[] => ['--site', file, '--trust', 'author.pub'];
    const nobody = ['--broker', 'mqtt://127.0.0.1:1'];
    const asked = [
      ['--help'],
      ['run', '--help'],
      ['rnu'],
      ['check', ...site('typo.yaml'), ...nobody],
      ['check', ...site('site.yaml'), ...nobody],
      ['status', '--data', 'nowhere'],
      ['load', 'site.yaml', ...site('site.yaml'), '--data', 'data'],
    ];
    for (const words of asked) expect(run(program(), words), words.join(' ')).toEqual(run(COMPILED, words));
  });

  it('forecasts from a plant’s readings on a broker', async () => {
    const broker = await startAedes();
    const plant = openConnection({
      url: broker.url,
      clientId: 'plant',
      protocol: 'auto',
      onMessage: (topic) => void got.add(topic),
    });
    const got = new Set<string>();
    const files = ['--site', 'site.yaml', '--trust', 'author.pub', '--bundle', 'first.swb', '--data', 'running'];
    const words = ['run', ...files, '--broker', broker.url, '--gateway', 'g1', '--clock', 'readings', '--log', 'warn'];
    const gateway = spawn(program(), words, { cwd: folder, stdio: ['ignore', 'inherit', 'inherit'] });
    const ended = new Promise((resolve) => gateway.once('exit', resolve));
    try {
      await plant.firstConnect(10_000);
      await plant.subscribe(['stillwell/marsh-lane/#']);
      await until('healthy', () => got.has('stillwell/marsh-lane/health'), PATIENCE_MS);
      for (const messages of plantMessages(12))
        for (const { topic, payload } of messages) await plant.publish({ topic, payload, qos: 1, retain: false });
      const expected = ['forecast/level', 'forecast/flow', 'forecasts', 'state'];
      await until('forecasts', () => expected.every((name) => got.has(`stillwell/marsh-lane/${name}`)), PATIENCE_MS);
      gateway.kill('SIGTERM');
      expect(await ended).toBe(0);
    } finally {
      gateway.kill('SIGKILL');
      await plant.end();
      await broker.stop();
    }
    expect(existsSync(join(folder, 'running/hang.json'))).toBe(false);
  });
});
