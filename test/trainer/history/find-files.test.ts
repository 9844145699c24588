/** What is named on the command line, and the files it stands for. */
import { mkdirSync, symlinkSync, writeFileSync } from 'node:fs';
import { join } from 'node:path';
import { beforeEach, describe, expect, it } from 'vitest';
import { findFiles } from '../../../trainer/history/find-files.ts';
import { testFolder } from '../../support/folder.ts';

let root: string;
beforeEach(() => {
  root = testFolder();
  for (const path of [
    'b.csv',
    'a.csv.gz',
    'deep/2024/x.parquet',
    'deep/2023/y.ndjson.zst',
    'deep/notes.md',
    '.old.csv',
    '_temporary/z.csv',
  ]) {
    mkdirSync(join(root, path, '..'), { recursive: true });
    writeFileSync(join(root, path), '');
  }
});
const found = (...names: string[]): string[] =>
  findFiles(
    names.map((name) => join(root, name)),
    null,
  ).map((path) => path.slice(root.length + 1));

describe('finding history files', () => {
  it('a file is itself, a missing one too: its reader says so', () => {
    expect(found('b.csv', 'none.csv', 'deep/notes.md')).toEqual(['b.csv', 'none.csv', 'deep/notes.md']);
  });
  it('a folder holds what is named like a history, by name, hidden and set-aside things apart', () => {
    expect(found('')).toEqual(['a.csv.gz', 'b.csv', 'deep/2023/y.ndjson.zst', 'deep/2024/x.parquet']);
  });
  it.each([
    ['*.csv', ['b.csv']],
    ['*', ['a.csv.gz', 'b.csv', 'deep/2023/y.ndjson.zst', 'deep/2024/x.parquet', '_temporary/z.csv'].sort()],
    ['?.csv*', ['a.csv.gz', 'b.csv']],
    ['**/*.parquet', ['deep/2024/x.parquet']],
    ['deep/202[0-3]/*', ['deep/2023/y.ndjson.zst']],
    ['deep/202[!3]/*', ['deep/2024/x.parquet']],
    ['{a,b}.csv*', ['a.csv.gz', 'b.csv']],
  ])('pattern %s', (pattern, files) => {
    expect(found(pattern).sort()).toEqual(files);
  });
  it('does not follow links between folders round and round', () => {
    symlinkSync(root, join(root, 'deep', 'loop'));
    expect(found('deep')).toEqual(['deep/2023/y.ndjson.zst', 'deep/2024/x.parquet']);
  });
  it('refuses a folder or pattern without files', () => {
    mkdirSync(join(root, 'empty'));
    expect(() => found('empty')).toThrow(
      /empty: expected history files in this folder \(\.csv, .*\), got none; check the path$/,
    );
    expect(() => found('*.tsv')).toThrow(
      /\*\.tsv: expected history files that match this pattern, got none; check the path$/,
    );
  });
});
