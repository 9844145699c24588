/** The recorded month on the machine of the tests. run.js runs it on other versions of Node and on another processor. */
import { readFileSync } from 'node:fs';
import { fileURLToPath } from 'node:url';
import { expect, test } from 'vitest';
import { KINDS, readKind } from './bundles.ts';
import { runMonth } from './month.ts';

const BUNDLES = fileURLToPath(new URL('.', import.meta.url));
const pinned: Record<string, unknown> = JSON.parse(readFileSync(new URL('pinned.json', import.meta.url), 'utf8'));

test.each(KINDS)('a month of the %s kind is the pinned one, to the bit', { timeout: 120_000 }, (kind) => {
  const { bundle, sealed } = readKind(BUNDLES, kind);
  expect(bundle.kind).toBe(kind);
  expect(runMonth(bundle, sealed)).toEqual(pinned[kind]);
});

test('another model changes all digests but that of the readings', { timeout: 120_000 }, () => {
  const { bundle, sealed } = readKind(BUNDLES, 'driven');
  const other = pinned.dense as Record<string, string>;
  for (const [name, digest] of Object.entries(runMonth(bundle, sealed)))
    expect(digest === other[name], name).toBe(name === 'readings');
});
