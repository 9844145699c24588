import { createKeyPair, decodeBundle, encodeBundle, parseSite, publicHalf, sealBundle } from '@stillwell/protocol';
import { describe, expect, test } from 'vitest';
import { checkBundle, type LoadContext } from '../../../runtime/bundle/load.ts';
import { seededNumbers } from '../../support/models.ts';
import { author, documentOf, SITE_TEXT, sealedOf, site, trusted } from '../../support/running-site.ts';

const context: LoadContext = { site, trusted, highWater: [{ epoch: 1, sequence: 4 }], isOwn: false };
const good = sealedOf(5);
const document = documentOf();

function refusal(sealed: Uint8Array, extra: Partial<LoadContext> = {}): { code: string; reason: string } {
  const verdict = checkBundle(sealed, { ...context, ...extra });
  if (verdict.ok) throw new Error('expected a refusal, got acceptance');
  expect(verdict.reason).not.toMatch(/\n| at .*:\d+:\d+/);
  return verdict;
}

/** The good document with something changed, sealed by the author all the same. */
function resealed(change: (bundle: ReturnType<typeof decodeBundle>) => object): Uint8Array {
  const bundle = decodeBundle(document);
  return sealBundle(encodeBundle({ ...bundle, ...change(bundle) }), { epoch: 1, sequence: 5 }, [author]);
}

const otherSite = (from: string, to: string) => ({ site: parseSite(SITE_TEXT.replace(from, to), 'site.yaml') });

test('a good one is taken, also one of a new key epoch from sequence 1', () => {
  expect(checkBundle(good, context)).toMatchObject({ ok: true, checked: { epoch: 1, sequence: 5 } });
  expect(checkBundle(sealedOf(1, {}, 2), context)).toMatchObject({ ok: true });
});

describe('refused, cheapest question first', () => {
  test('size', () => expect(refusal(new Uint8Array(64 * 1024 + 1)).code).toBe('size'));
  test('envelope', () => expect(refusal(good.subarray(0, 200)).code).toBe('envelope'));
  test('digest', () => {
    const turned = Uint8Array.from(good);
    turned[good.length - 1]! ^= 1;
    expect(refusal(turned).code).toBe('digest');
  });
  test('signature, by a key not trusted', () => {
    const stranger = createKeyPair(new Uint8Array(32).fill(9));
    const verdict = refusal(sealBundle(document, { epoch: 1, sequence: 5 }, [stranger]));
    expect(verdict.code).toBe('signature');
    expect(refusal(good, { trusted: [publicHalf(stranger)] }).code).toBe('signature');
  });
  test('sequence, at and below the mark, and of an epoch that is over', () => {
    for (const sequence of [4, 3, 1]) expect(refusal(sealedOf(sequence)).code).toBe('sequence');
    const verdict = refusal(good, { highWater: [{ epoch: 2, sequence: 1 }] });
    expect(verdict).toMatchObject({ code: 'sequence', reason: 'key epoch 1 is over, this gateway is at epoch 2' });
    expect(checkBundle(sealedOf(3), { ...context, isOwn: true }).ok).toBe(true);
  });
  test('document', () => {
    const garbled = sealBundle(Uint8Array.of(0xc1, 1, 2), { epoch: 1, sequence: 5 }, [author]);
    expect(refusal(garbled).code).toBe('document');
  });
  test('site', () => {
    const verdict = refusal(good, otherSite('marsh-lane', 'mill-road'));
    expect(verdict).toEqual({ ok: false, code: 'site', reason: 'bundle for site "marsh-lane", this is "mill-road"' });
  });
  test('class', () => expect(refusal(good, otherSite('class: test', 'class: pump')).code).toBe('class'));
  test.each([
    ['unit', 'unit: m', 'unit: cm'],
    ['name', 'name: flow', 'name: inflow'],
    ['tick', 'tick: 1min', 'tick: 2min'],
    ['aggregate', 'aggregate: last', 'aggregate: mean'],
  ])('schema: another %s', (field, from, to) => {
    const verdict = refusal(good, otherSite(from, to));
    expect(verdict.code).toBe('schema');
    expect(verdict.reason).toContain(field);
  });
  test('probe: a machine that computes otherwise', () => {
    const verdict = refusal(resealed((bundle) => ({ probe: { ...bundle.probe, digest: new Uint8Array(32).fill(1) } })));
    expect(verdict.code).toBe('probe');
  });
  test('probe: any weight changed under a good signature', () => {
    const sealed = resealed((bundle) => {
      const data = Uint8Array.from(bundle.linear!.bottleneck.data);
      data[3]! ^= 4;
      return { linear: { ...bundle.linear!, bottleneck: { ...bundle.linear!.bottleneck, data } } };
    });
    expect(refusal(sealed).code).toBe('probe');
  });
});

test('2000 mutants of a good bundle: none accepted, none throws', () => {
  const random = seededNumbers(31);
  const below = (n: number): number => Math.floor(random() * n);
  for (let i = 0; i < 2000; i++) {
    let mutant = Uint8Array.from(good);
    const kind = below(3);
    if (kind === 0) for (let edits = 1 + below(8); edits > 0; edits--) mutant[below(mutant.length)]! ^= 1 << below(8);
    else if (kind === 1) mutant = mutant.slice(0, below(mutant.length));
    else mutant = Uint8Array.from([...mutant.slice(0, 56), ...mutant.slice(56 + below(200))]);
    if (Buffer.compare(mutant, good) === 0) continue;
    expect(checkBundle(mutant, context).ok).toBe(false);
  }
});
