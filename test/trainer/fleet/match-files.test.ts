import { mkdirSync, symlinkSync, writeFileSync } from 'node:fs';
import { dirname, join, relative } from 'node:path';
import { expect, it } from 'vitest';
import { filesBelow, matchFiles } from '../../../trainer/fleet/match-files.ts';
import { testFolder } from '../../support/folder.ts';

const FILES = ['b.csv', 'a.csv', 'a.csv.gz', 'x1/c.csv', 'x2/deep/d.csv', 'x2/e.txt', '.hidden/f.csv', 'a[1].csv'];

function folderOf(files: readonly string[]): string {
  const folder = testFolder();
  for (const file of files) {
    mkdirSync(dirname(join(folder, file)), { recursive: true });
    writeFileSync(join(folder, file), 'x');
  }
  return folder;
}

it.each([
  ['*.csv', ['a.csv', 'a[1].csv', 'b.csv']],
  ['a.csv*', ['a.csv', 'a.csv.gz']],
  ['?.csv', ['a.csv', 'b.csv']],
  ['x?/*.csv', ['x1/c.csv']],
  ['**/*.csv', ['a.csv', 'a[1].csv', 'b.csv', 'x1/c.csv', 'x2/deep/d.csv']],
  ['x2/**', ['x2/deep/d.csv', 'x2/e.txt']],
  ['a[1].csv', ['a[1].csv']],
  ['no*.csv', []],
  ['nowhere/*.csv', []],
  // A plain path stands for itself, there or not.
  ['gone.csv', ['gone.csv']],
])('%s', (pattern, found) => {
  const folder = folderOf(FILES);
  expect(matchFiles(folder, pattern).map((path) => relative(folder, path))).toEqual(found);
});

it('follows links to files, not links to folders, which may lead round in a circle', () => {
  const folder = folderOf(['x/a.csv']);
  symlinkSync(join(folder, 'x/a.csv'), join(folder, 'x/b.csv'));
  symlinkSync(folder, join(folder, 'x/round'));
  expect(filesBelow(folder).map((path) => relative(folder, path))).toEqual(['x/a.csv', 'x/b.csv']);
});
