/** Which of the two programs `stillwell` starts: the joined one only where it is there and nothing was compiled since. */
import { execFileSync } from 'node:child_process';
import { createHash } from 'node:crypto';
import { cpSync, mkdirSync, readFileSync, rmSync, statSync, utimesSync, writeFileSync } from 'node:fs';
import { join } from 'node:path';
import { fileURLToPath } from 'node:url';
import { expect, it } from 'vitest';
import { testFolder } from '../../support/folder.ts';

const TRAINER = fileURLToPath(new URL('../../../trainer', import.meta.url));
const RECORD = 'dist/tsconfig.tsbuildinfo';

/** A package whose two programs only say which of them runs; its joined one was made of one record of the compiler. */
function program() {
  const folder = testFolder();
  const at = (path: string): string => join(folder, path);
  for (const path of ['stillwell.js', 'join/current.js']) cpSync(join(TRAINER, path), at(path));
  writeFileSync(at('package.json'), '{"type":"module"}');
  for (const name of ['dist', 'joined']) {
    mkdirSync(at(name));
    writeFileSync(at(`${name}/cli.js`), `process.stdout.write('${name} ' + process.argv.slice(2).join(' '));\n`);
  }
  writeFileSync(at(RECORD), 'sources as joined');
  const { size, mtimeMs } = statSync(at(RECORD));
  const digest = createHash('sha256')
    .update(readFileSync(at(RECORD)))
    .digest('hex');
  writeFileSync(at('joined/inputs.json'), JSON.stringify([[`../${RECORD}`, size, mtimeMs, digest]]));
  const started = (): string =>
    execFileSync(process.execPath, [at('stillwell.js'), 'seal', '--json'], { encoding: 'utf8' });
  return { at, started };
}

const JOINED = 'joined seal --json';
const COMPILED = 'dist seal --json';

it('starts the joined program while the record of the compiler is as it was', () => {
  expect(program().started()).toBe(JOINED);
});

it('starts the compiled one after a compilation, also one of as many bytes', () => {
  const { at, started } = program();
  writeFileSync(at(RECORD), 'sources changed..');
  expect(started()).toBe(COMPILED);
  writeFileSync(at(RECORD), 'sources changed, and longer');
  expect(started()).toBe(COMPILED);
  writeFileSync(at(RECORD), 'sources as joined');
  expect(started()).toBe(JOINED);
});

it('starts the joined program of a copied tree, whose files have other times', () => {
  const { at, started } = program();
  utimesSync(at(RECORD), 1, 1);
  expect(started()).toBe(JOINED);
});

it('starts the compiled one where the record is gone, or there is no joined one', () => {
  const { at, started } = program();
  rmSync(at(RECORD));
  expect(started()).toBe(COMPILED);
  const other = program();
  rmSync(other.at('joined'), { recursive: true });
  expect(other.started()).toBe(COMPILED);
});

it('starts the joined program of a package, which has no list of what it was made of', () => {
  const { at, started } = program();
  rmSync(at('joined/inputs.json'));
  rmSync(at(RECORD));
  expect(started()).toBe(JOINED);
});
