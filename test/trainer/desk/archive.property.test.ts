/** Whatever order segments come in and however often, the archive is the same. */
import fc from 'fast-check';
import { expect, test } from 'vitest';
import { readSite } from '../../../trainer/desk/archive.ts';
import { Chain } from '../../../trainer/desk/chain.ts';
import { takeIn } from '../../../trainer/desk/intake.ts';
import { Shelf } from '../../../trainer/desk/shelf.ts';
import { openStore } from '../../../trainer/desk/store/open.ts';
import { testFolder } from '../../support/folder.ts';
import { syntheticReadings } from '../../support/models.ts';
import { SegmentMaker, sealableBundle } from '../../support/segment-maker.ts';
import { shelfFolder } from './shelf-folder.ts';

const SITE = 'cold-store-2';
const bundle = sealableBundle({ site: SITE, seed: 3, inputs: ['setpoint'] });

/** Nine segments of two streams whose ticks overlap, late readings across them. */
function segments(): Uint8Array[] {
  const rows = syntheticReadings(bundle.model, 120, 11, 0.15);
  const makers = [1, 2].map((stream) => new SegmentMaker(SITE, `gw-${stream}`, bundle.document, bundle.model, stream));
  makers.forEach((maker, m) => {
    rows.slice(m * 50, m * 50 + 70).forEach((row, i) => {
      maker.tick(1000 + m * 50 + i, row);
      if (i % 9 === 4) maker.correct(1000 + m * 50 + Math.max(0, i - 20), i % 3, 500 + i + m);
      if (i % 16 === 15) maker.close();
    });
    maker.close();
  });
  return makers.flatMap((maker) => maker.made.map((one) => one.bytes));
}

async function archiveOf(order: readonly Uint8Array[]) {
  const store = await openStore(testFolder());
  try {
    const shelf = new Shelf(store, shelfFolder([bundle.document]));
    await shelf.refresh();
    const chain = new Chain(store, shelf);
    for (const bytes of order) {
      const [outcome] = await takeIn(store, [{ site: SITE, bytes, atMs: 0 }]);
      if (outcome!.kind === 'stored') await chain.follow(outcome!.name);
    }
    return await readSite(store, SITE);
  } finally {
    await store.close();
  }
}

test('any order with duplicates gives the same archive', { timeout: 60_000 }, async () => {
  const all = segments();
  const expected = await archiveOf(all);
  expect(expected.segments).toBe(all.length);
  const order = fc
    .tuple(fc.shuffledSubarray(all, { minLength: all.length }), fc.array(fc.nat(all.length - 1), { maxLength: 6 }))
    .chain(([whole, again]) =>
      fc.shuffledSubarray([...whole, ...again.map((i) => all[i]!)], { minLength: whole.length + again.length }),
    );
  await fc.assert(
    fc.asyncProperty(order, async (arrivals) => {
      expect(await archiveOf(arrivals)).toEqual(expected);
    }),
    { seed: 20_311, numRuns: 6 },
  );
});
