/** The bundles that the recorded month runs on: sealed files beside this one, so that no machine computes them anew. */
import { readFileSync } from 'node:fs';
import { join } from 'node:path';
import { type Bundle, decodeBundle, openSealed } from '@stillwell/protocol';
import { trusted } from '../support/running-site.ts';
import { type MonthDigests, runMonth } from './month.ts';

/** The five kinds, each with all that it may have. */
export const KINDS = ['linear', 'dense', 'featured', 'switched', 'driven'] as const;

/** One of them. */
export type Kind = (typeof KINDS)[number];

/** Reads a kind's bundle from a folder. */
export function readKind(folder: string, kind: Kind): { bundle: Bundle; sealed: Uint8Array } {
  const sealed = new Uint8Array(readFileSync(join(folder, `${kind}.swb`)));
  return { sealed, bundle: decodeBundle(openSealed(sealed, trusted).document) };
}

/** The month of every kind. */
export function runKinds(folder: string): Record<Kind, MonthDigests> {
  const run = (kind: Kind): MonthDigests => {
    const { bundle, sealed } = readKind(folder, kind);
    return runMonth(bundle, sealed);
  };
  return Object.fromEntries(KINDS.map((kind) => [kind, run(kind)])) as Record<Kind, MonthDigests>;
}
