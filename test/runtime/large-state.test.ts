/** States so large that a segment which starts with one in full has little room left. */
import { encodeBundle, MAX_SEGMENT_BYTES, MAX_SNAPSHOT_BYTES, readSegmentHead, sealBundle } from '@stillwell/protocol';
import { modelFromBundle } from '@stillwell/runtime/filter';
import { expect, test } from 'vitest';
import { BundleKeeper } from '../../runtime/bundle/change.ts';
import { checkBundle } from '../../runtime/bundle/load.ts';
import { Engine } from '../../runtime/engine.ts';
import { proven } from '../support/every-kind.ts';
import { MemoryDisk } from '../support/memory-disk.ts';
import { type ModelChoice, seededNumbers, syntheticBundle } from '../support/models.ts';
import { author, CHANNELS, FIRST_TICK, plantMessage, site, trusted } from '../support/running-site.ts';

const AROUND: ModelChoice = {
  site: site.site,
  equipmentClass: 'test',
  signals: ['level', 'flow'],
  inputs: ['pump'],
  horizon: 24,
  rejectSd: 1e6,
};

test('a bundle that remembers more than a segment holds is refused, in one sentence that says how much', () => {
  const large = syntheticBundle({ ...AROUND, lags: [7000] });
  expect(() => modelFromBundle(large)).toThrow(
    /^model memory \(lags, round\): expected a snapshot of at most 163840 bytes, got 1[67]\d{4} bytes/,
  );
  const document = encodeBundle({ ...proven(syntheticBundle(AROUND)), linear: large.linear });
  const sealed = sealBundle(document, { epoch: 1, sequence: 1 }, [author]);
  expect(checkBundle(sealed, { site, trusted, highWater: [], isOwn: false })).toMatchObject({
    ok: false,
    code: 'model',
  });
});

test('segments that start with a large state in full close early enough to be sent, and none is lost', () => {
  const bundle = proven(syntheticBundle({ ...AROUND, lags: [6500] }));
  const disk = new MemoryDisk();
  const keeper = new BundleKeeper(disk, 'data', site, trusted);
  const where = { site, gateway: 'g1', disk, folder: 'data', segmentTicks: 60_000, spoolBytes: 1e9 };
  const engine = new Engine({ ...where, note: () => {} }, keeper);
  const install = (sequence: number): void => {
    // Another document each time, so that the next segment must start in full.
    const document = encodeBundle({ ...bundle, madeAtMs: bundle.madeAtMs + sequence });
    const offered = keeper.offer(
      sealBundle(document, { epoch: 1, sequence }, [author]),
      engine.serving?.checked ?? null,
    );
    if (offered.outcome !== 'accepted') throw new Error(JSON.stringify(offered));
    engine.install(offered.checked);
    keeper.serves(offered.checked);
  };
  const random = seededNumbers(3);
  install(1);
  for (let n = 0; n < 18_000; n++) {
    if (n === 7000) install(2);
    for (let c = 0; c < CHANNELS.length; c++) {
      const value = Math.round(1e4 * (random() - 0.5)) / 100;
      const { topic, payload, timeMs } = plantMessage(c, (FIRST_TICK + n) * 60_000 + 500 + c, value);
      engine.message(topic, payload, timeMs, null);
    }
    engine.close((FIRST_TICK + n + 1) * 60_000 + site.latenessMs);
    engine.settle();
  }
  expect(engine.journal!.counts.lost).toBe(0);
  const segments = disk.list('data/spool').map((name) => disk.read(`data/spool/${name}`)!);
  let next = FIRST_TICK;
  let full = 0;
  for (const bytes of segments) {
    expect(bytes.length).toBeLessThanOrEqual(MAX_SEGMENT_BYTES);
    const head = readSegmentHead(bytes);
    expect(head.firstTick).toBe(next);
    next += head.ticks;
    if ((head.startState?.length ?? 0) > 0.9 * MAX_SNAPSHOT_BYTES) full++;
  }
  expect(full).toBeGreaterThan(0);
  expect(segments.length).toBeGreaterThan(1);
});
