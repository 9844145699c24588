import { mkdtempSync, rmSync, writeFileSync } from 'node:fs';
import { tmpdir } from 'node:os';
import { join } from 'node:path';
import { afterEach, expect, it } from 'vitest';
import { openBundleFile } from '../../trainer/bundle-file.ts';

const folder = mkdtempSync(join(tmpdir(), 'stillwell-bundle-file-'));
afterEach(() => rmSync(folder, { recursive: true, force: true }));

it('says of a file far larger than any bundle that it is none, and what to do', () => {
  const path = join(folder, 'factors.swf');
  writeFileSync(path, new Uint8Array(100_000));
  expect(() => openBundleFile(path)).toThrow(
    /factors\.swf: expected a bundle .* got bytes that are neither .*100000.*right file/,
  );
});
