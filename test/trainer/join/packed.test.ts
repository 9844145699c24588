/**
 * The package as npm packs it, in a folder where nothing of ours and only those libraries are installed that the joined
 * program leaves out: whatever it did not find in itself would be missed. Without its joined files, the compiled ones run.
 */
import { execFileSync } from 'node:child_process';
import {
  existsSync,
  mkdirSync,
  mkdtempSync,
  readdirSync,
  readFileSync,
  rmSync,
  symlinkSync,
  writeFileSync,
} from 'node:fs';
import { tmpdir } from 'node:os';
import { dirname, join } from 'node:path';
import { fileURLToPath } from 'node:url';
import { DuckDBInstance } from '@duckdb/node-api';
import { afterAll, beforeAll, describe, expect, it } from 'vitest';
import { LONG_FROM } from '../../../trainer/history/long-limits.ts';
import { freePort } from '../../support/broker.ts';
import { fleetLog, fleetSite, writeFleet } from '../../support/fleet.ts';
import { testFolder } from '../../support/folder.ts';

const ROOT = fileURLToPath(new URL('../../..', import.meta.url));
const COMPILED = join(ROOT, 'trainer/dist/cli.js');
const LEFT_OUT = ['@duckdb/node-bindings', 'libsql', 'piscina'];
/** A dozen processes, some of which learn, on a busy machine. */
const PATIENCE_MS = 180_000;
let folder = '';
let packed = '';

/** Joins what is compiled now, and unpacks the package. */
beforeAll(() => {
  execFileSync(process.execPath, [join(ROOT, 'trainer/join/build.js')]);
  folder = mkdtempSync(join(tmpdir(), 'stillwell-packed-'));
  // Scripts would compile anew, under the feet of other tests.
  const words = ['pack', '--json', '--ignore-scripts', '--pack-destination', folder];
  execFileSync('npm', [...words, '--workspace', 'trainer'], { cwd: ROOT, stdio: ['ignore', 'ignore', 'inherit'] });
  packed = install(folder, LEFT_OUT);
}, PATIENCE_MS);
afterAll(() => rmSync(folder, { recursive: true, force: true }));

/** Unpacks it beside the libraries of these names. */
function install(where: string, libraries: readonly string[]): string {
  const home = join(where, 'node_modules/@stillwell/trainer');
  mkdirSync(home, { recursive: true });
  const archive = join(folder, readdirSync(folder).find((name) => name.endsWith('.tgz'))!);
  execFileSync('tar', ['-xzf', archive, '-C', home, '--strip-components', '1']);
  for (const name of libraries) {
    const link = join(where, 'node_modules', name);
    mkdirSync(dirname(link), { recursive: true });
    symlinkSync(join(ROOT, 'node_modules', name), link);
  }
  return home;
}

/** What a command prints, by the program at `file`; its refusal where it ends with 2. */
function run(file: string, words: readonly string[], cwd: string): string {
  try {
    return execFileSync(process.execPath, [file, ...words], {
      cwd,
      encoding: 'utf8',
      stdio: ['ignore', 'pipe', 'pipe'],
    });
  } catch (error) {
    const { status, stderr } = error as { status: number; stderr: string };
    if (status !== 2) throw error;
    return stderr;
  }
}

/** Of the packed program. */
function packedRun(words: readonly string[], cwd: string): string {
  return run(join(packed, 'stillwell.js'), words, cwd);
}

describe('what is packed', () => {
  it('has the joined files, the licences of what is in them, and no list of what they were made of', () => {
    expect(existsSync(join(packed, 'joined/cli.js'))).toBe(true);
    expect(existsSync(join(packed, 'joined/inputs.json'))).toBe(false);
    expect(existsSync(join(packed, 'join/build.js'))).toBe(false);
    const notices = readFileSync(join(packed, 'joined/LICENSES.txt'), 'utf8');
    for (const name of ['zod', 'commander', 'msgpackr', 'yaml', 'ml-matrix', 'kysely', 'mqtt', '@duckdb/node-api'])
      expect(notices, name).toMatch(new RegExp(`^${name} \\d[\\s\\S]*?(MIT|ISC|Permission)`, 'm'));
  });

  it('declares what the joined files load by name', () => {
    const { dependencies } = JSON.parse(readFileSync(join(packed, 'package.json'), 'utf8')) as { dependencies: object };
    expect(Object.keys(dependencies)).toEqual(expect.arrayContaining(LEFT_OUT));
  });
});

describe('the joined program', { timeout: PATIENCE_MS }, () => {
  it('knows every command', () => {
    // Help loads them all.
    expect(packedRun(['--help'], folder)).toBe(run(COMPILED, ['--help'], folder));
  });

  it('fits a long history on a second thread', () => {
    const at = testFolder();
    writeFileSync(join(at, 'site.yaml'), fleetSite('north'));
    writeFileSync(join(at, 'log.csv'), fleetLog(3, LONG_FROM + 1000));
    const words = ['fit', '--site', 'site.yaml', '--history', 'log.csv', '--kind', 'linear', '--json', '--out', 'fit'];
    expect(JSON.parse(packedRun(words, at))).toMatchObject({ has_skill: true });
    expect(readdirSync(join(at, 'fit'))).toContain('factors.swf');
  });

  it('fits a fleet on its workers', () => {
    const at = testFolder();
    writeFleet(join(at, 'sites'), ['north', 'south']);
    packedRun(['fit', '--fleet', 'sites', '--threads', '2', '--kind', 'linear', '--out', 'fits'], at);
    for (const name of ['north', 'south']) expect(readdirSync(join(at, 'fits', name))).toContain('candidate.swc');
  });

  it('fits columns to the same bytes as the compiled program, and seals', async () => {
    const at = testFolder();
    writeFileSync(join(at, 'site.yaml'), fleetSite('north'));
    writeFileSync(join(at, 'log.csv'), fleetLog(5));
    const connection = await (await DuckDBInstance.create(':memory:')).connect();
    await connection.run(`COPY (SELECT * FROM '${at}/log.csv') TO '${at}/log.parquet' (FORMAT parquet)`);
    connection.closeSync();
    const words = ['fit', '--site', 'site.yaml', '--history', 'log.parquet', '--kind', 'linear', '--out'];
    packedRun([...words, 'joined'], at);
    run(COMPILED, [...words, 'compiled'], at);
    for (const name of ['candidate.swc', 'report.html', 'hindcast.json', 'factors.swf'])
      expect(readFileSync(join(at, 'joined', name)).equals(readFileSync(join(at, 'compiled', name))), name).toBe(true);
    packedRun(['keys', 'new', '--out', 'author.key'], at);
    const seal = ['seal', '--candidate', 'joined/candidate.swc', '--key', 'author.key', '--override', 'a test'];
    expect(packedRun([...seal, '--out', 'north.swb'], at)).toMatch(/north\.swb/);
  });

  it('keeps the desk’s database and speaks to brokers', async () => {
    const at = testFolder();
    const broker = ['--broker', `mqtt://127.0.0.1:${await freePort()}`];
    expect(packedRun(['desk', '--data', 'desk', ...broker], at)).toMatch(/ECONNREFUSED|refused/);
    expect(packedRun(['desk', 'status', '--data', 'desk'], at)).toBe('Nothing received yet.\n');
  });
});

it('without its joined files the compiled ones run', { timeout: PATIENCE_MS }, () => {
  const where = testFolder();
  const home = install(where, ['commander']);
  rmSync(join(home, 'joined'), { recursive: true });
  for (const name of ['protocol', 'runtime'])
    symlinkSync(join(ROOT, name), join(where, 'node_modules/@stillwell', name));
  expect(run(join(home, 'stillwell.js'), ['keys', '--help'], where)).toBe(run(COMPILED, ['keys', '--help'], where));
});
