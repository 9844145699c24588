/** What a bundle's document promises, held by every kind: the same bytes again, the same bits, a probe that catches a flipped byte. */
import {
  type Bundle,
  bundleDigest,
  decode,
  decodeBundle,
  encode,
  encodeBundle,
  sealBundle,
  type Tensor,
} from '@stillwell/protocol';
import { modelFromBundle, runProbe } from '@stillwell/runtime/filter';
import { describe, expect, test } from 'vitest';
import { checkBundle } from '../../runtime/bundle/load.ts';
import { bundleFacts, bundleText } from '../../trainer/describe-bundle.ts';
import { bundleOfKind, EVERY_KIND } from '../support/every-kind.ts';
import { author, site, trusted } from '../support/running-site.ts';

const SECTIONS = ['linear', 'dense', 'features', 'switched', 'driven'] as const;

/** A bundle for the invented site, where its channels can be had. */
function siteBundle(name: (typeof EVERY_KIND)[number]): Bundle {
  return bundleOfKind(name, { site: site.site, equipmentClass: 'test', tickMs: site.tickMs });
}

const documents = new Map(EVERY_KIND.map((name) => [name, encodeBundle(bundleOfKind(name))]));

/** The map that a document is. */
function contentsOf(document: Uint8Array): Record<string, unknown> {
  return decode(document) as Record<string, unknown>;
}

/** Tensors of a value, each with its path. */
function tensorsOf(value: unknown, path = ''): [string, Tensor][] {
  if (typeof value !== 'object' || value === null || value instanceof Uint8Array) return [];
  if ('data' in value && 'scales' in value) return [[path, value as Tensor]];
  return Object.entries(value).flatMap(([key, inner]) => tensorsOf(inner, `${path}.${key}`));
}

describe.each(EVERY_KIND)('%s', (name) => {
  const bundle = siteBundle(name);
  const document = encodeBundle(bundle);

  test('a document decodes to what was encoded, and encodes to the same bytes', () => {
    const back = decodeBundle(document);
    expect(Buffer.from(encodeBundle(back)).equals(Buffer.from(document))).toBe(true);
    expect(bundleDigest(encodeBundle(back))).toEqual(bundleDigest(document));
  });

  test('the model of the document gives the bits of the maker', () => {
    const maker = runProbe(modelFromBundle(bundle), 77, 200).outputs;
    const reader = runProbe(modelFromBundle(decodeBundle(document)), 77, 200).outputs;
    expect(Buffer.from(reader).equals(Buffer.from(maker))).toBe(true);
  });

  test('a gateway takes it, and refuses it with one flipped byte in a tensor of its kind', () => {
    if (name === 'switched') return;
    const context = { site, trusted, highWater: [], isOwn: false };
    const judge = (bytes: Uint8Array) => checkBundle(sealBundle(bytes, { epoch: 1, sequence: 1 }, [author]), context);
    expect(judge(document)).toMatchObject({ ok: true });
    for (const section of SECTIONS) {
      for (const [path, tensor] of tensorsOf(bundle[section], section)) {
        const wrong = structuredClone(bundle) as Bundle;
        const [, target] = tensorsOf(wrong[section], section).find(([other]) => other === path)!;
        // The lowest byte of the middle element, so that shapes and limits still hold.
        const width = tensor.data.length / (tensor.rows * tensor.cols);
        const middle = width * Math.floor((tensor.rows * tensor.cols) / 2);
        if (target.data.length === 0) continue;
        target.data[middle]! ^= 1;
        expect(judge(encodeBundle(wrong)), path).toMatchObject({ ok: false });
      }
    }
  });

  test('is described in words that hold no gap', () => {
    const facts = bundleFacts({ bundle, document, digest: bundleDigest(document), model: modelFromBundle(bundle) });
    expect(bundleText(facts)).not.toMatch(/undefined|NaN|null/);
    const parts = Object.values(facts.bytes.parts).reduce((sum, size) => sum + size, 0);
    // What is not named is names, counts and the probe.
    expect(parts).toBeGreaterThan(0.85 * document.length - 500);
  });

  test.each(SECTIONS)(
    'without or with a section %s that is not as its kind has it, it is refused in one sentence',
    (section) => {
      const owner = EVERY_KIND.find((kind) => section in contentsOf(documents.get(kind)!))!;
      const { [section]: own, ...rest } = contentsOf(document);
      const wrong = own === undefined ? { ...rest, [section]: contentsOf(documents.get(owner)!)[section] } : rest;
      let message = '';
      try {
        decodeBundle(encode(wrong));
      } catch (error) {
        message = (error as Error).message;
      }
      expect(message).toMatch(new RegExp(`^bundle document: ${section}: expected .*kind "${bundle.kind}".*, got `));
    },
  );

  test('of a kind nobody knows, it is refused', () => {
    expect(() => decodeBundle(encode({ ...contentsOf(document), kind: 'neural' }))).toThrow(/bundle document: kind/);
  });
});
