/** The desk's process killed between commit and receipt: nothing is lost, and the next start gives the receipt. */
import { spawnSync } from 'node:child_process';
import { existsSync, writeFileSync } from 'node:fs';
import { join } from 'node:path';
import { fileURLToPath } from 'node:url';
import { parseReceiptMessage } from '@stillwell/protocol';
import { expect, test } from 'vitest';
import { readSite } from '../../../trainer/desk/archive.ts';
import { Collector } from '../../../trainer/desk/collect.ts';
import { Shelf } from '../../../trainer/desk/shelf.ts';
import { openStore } from '../../../trainer/desk/store/open.ts';
import { testFolder } from '../../support/folder.ts';
import { syntheticReadings } from '../../support/models.ts';
import { SegmentMaker, sealableBundle } from '../../support/segment-maker.ts';
import { shelfFolder } from './shelf-folder.ts';

const built = fileURLToPath(new URL('../../../trainer/dist/desk/', import.meta.url));
const bundle = sealableBundle({ site: 'booster-4', seed: 6 });

/** A desk whose link kills the process instead of sending. */
const DYING_DESK = `
import { readFileSync } from 'node:fs';
const [built, data, bundles, ...segments] = process.argv.slice(2);
const { openStore } = await import(built + 'store/open.js');
const { Collector } = await import(built + 'collect.js');
const { Shelf } = await import(built + 'shelf.js');
const store = await openStore(data);
const collector = new Collector({
  store, shelf: new Shelf(store, bundles), root: 'stillwell', onEvent: () => {},
  publish: async () => process.kill(process.pid, 'SIGKILL'),
});
for (const file of segments) collector.offer('stillwell/booster-4/segments', readFileSync(file));
await collector.settle();
`;

test.skipIf(!existsSync(join(built, 'collect.js')))(
  'killed with the receipt in hand',
  { timeout: 60_000 },
  async () => {
    const data = testFolder();
    const bundles = shelfFolder([bundle.document]);
    const maker = new SegmentMaker('booster-4', 'gw-4', bundle.document, bundle.model);
    syntheticReadings(bundle.model, 60, 3, 0.1).forEach((row, i) => {
      maker.tick(900 + i, row);
      if (i % 20 === 19) maker.close();
    });
    const scratch = testFolder();
    const files = maker.made.map(({ bytes }, i) => {
      const file = join(scratch, `${i}.sws`);
      writeFileSync(file, bytes);
      return file;
    });
    const script = join(scratch, 'dying-desk.mjs');
    writeFileSync(script, DYING_DESK);
    const dead = spawnSync(process.execPath, [script, built, data, bundles, ...files], { encoding: 'utf8' });
    expect(dead).toMatchObject({ signal: 'SIGKILL', stderr: '' });

    const receipts: number[] = [];
    const store = await openStore(data);
    const collector = new Collector({
      store,
      shelf: new Shelf(store, bundles),
      root: 'stillwell',
      onEvent: () => {},
      publish: async (_, payload) =>
        void receipts.push(...parseReceiptMessage(payload).segments.map((one) => one.number)),
    });
    await collector.refresh(true);
    await collector.repeatReceipts();
    expect(receipts).toEqual([0, 1, 2]);
    expect((await readSite(store, 'booster-4')).ticks).toHaveLength(60);
    // The gateway, which never heard, sends again: one more receipt, no second row.
    collector.offer('stillwell/booster-4/segments', maker.made[1]!.bytes);
    await collector.settle();
    expect(receipts).toEqual([0, 1, 2, 1]);
    expect((await readSite(store, 'booster-4')).segments).toBe(3);
    await store.close();
  },
);
