/** Files replaced whole: the mode asked for, whatever an earlier run left beside. */
import { mkdirSync, readdirSync, readFileSync, statSync, symlinkSync, writeFileSync } from 'node:fs';
import { join } from 'node:path';
import { expect, test } from 'vitest';
import { replaceFiles } from '../../runtime/files.ts';
import { testFolder } from '../support/folder.ts';

test('a rest of an earlier run lends neither its mode nor its link to a private file', () => {
  const folder = testFolder();
  const path = join(folder, 'author.key');
  const elsewhere = join(folder, 'elsewhere');
  writeFileSync(elsewhere, 'untouched', { mode: 0o644 });
  symlinkSync(elsewhere, join(folder, `.author.key.${process.pid}.part`));
  replaceFiles([{ path, bytes: 'secret', mode: 0o600 }]);
  expect(readFileSync(path, 'utf8')).toBe('secret');
  expect(statSync(path).mode & 0o777).toBe(0o600);
  expect(readFileSync(elsewhere, 'utf8')).toBe('untouched');
});

test('all files or none: a folder in the way of one leaves the others as they were', () => {
  const folder = testFolder();
  const first = join(folder, 'first');
  writeFileSync(first, 'old');
  mkdirSync(join(folder, 'second'));
  expect(() =>
    replaceFiles([
      { path: first, bytes: 'new' },
      { path: join(folder, 'second'), bytes: 'new' },
    ]),
  ).toThrow(/folder/);
  expect(readFileSync(first, 'utf8')).toBe('old');
  expect(readdirSync(folder).sort()).toEqual(['first', 'second']);
});
