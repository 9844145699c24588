import { createHash } from 'node:crypto';
import { mkdirSync, mkdtempSync, rmSync, writeFileSync } from 'node:fs';
import { tmpdir } from 'node:os';
import { join } from 'node:path';
import { encodeBundle } from '@stillwell/protocol';
import { modelFromBundle, runProbe } from '@stillwell/runtime/filter';
import { afterEach, beforeEach, expect, it } from 'vitest';
import { openBundleFile, openProvenFile } from '../../trainer/bundle-file.ts';
import { sampleBundle } from '../support/sample-bundle.ts';

const folder = mkdtempSync(join(tmpdir(), 'stillwell-bundle-file-'));
beforeEach(() => mkdirSync(folder, { recursive: true }));
afterEach(() => rmSync(folder, { recursive: true, force: true }));

it('says of a file far larger than any bundle that it is none, and what to do', () => {
  const path = join(folder, 'factors.swf');
  writeFileSync(path, new Uint8Array(100_000));
  expect(() => openBundleFile(path)).toThrow(
    /factors\.swf: expected a bundle .* got bytes that are neither .*100000.*right file/,
  );
});

it('does not hand out a model for scoring whose probe comes out otherwise', () => {
  const sound = sampleBundle();
  const run = runProbe(modelFromBundle(sound), sound.probe.seed, 32);
  const stated = new Uint8Array(createHash('sha256').update(run.outputs).digest());
  const proven = { ...sound, probe: { ...sound.probe, ticks: 32, digest: stated, last: run.last } };
  const path = join(folder, 'candidate.swc');
  writeFileSync(path, encodeBundle(proven));
  expect(openProvenFile(path).bundle.site).toBe(sound.site);
  const last = proven.probe.last.map((value, k) => (k === 0 ? value + 1 : value));
  const digest = proven.probe.digest.map((byte, k) => (k === 0 ? byte ^ 1 : byte));
  writeFileSync(path, encodeBundle({ ...proven, probe: { ...proven.probe, digest, last } }));
  expect(openBundleFile(path).bundle.site).toBe(sound.site);
  expect(() => openProvenFile(path)).toThrow(/candidate\.swc: the probe's outputs differ .* the file is damaged/);
});
