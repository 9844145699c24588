/** A model that learns once more from everything must not cut off what a growing plant read last. */
import { expect, test } from 'vitest';
import { FIT_DEFAULTS, fit as fitHistory } from '../../trainer/pipeline.ts';
import { hourlySite, seriesOf } from '../support/history.ts';
import { seededNumbers } from '../support/models.ts';

test('clips leave room for every reading that was learned from', async () => {
  const random = seededNumbers(8);
  // Grows ever faster: the judged part leaves the range of what came before it.
  const grown = Float64Array.from({ length: 900 }, (_, t) => Math.round(100 * (t / 150) ** 4 + 100 * random()) / 100);
  const lattices = [{ step: 0.01, offset: 0 }];
  const input = { series: seriesOf(['level'], [grown]), site: hourlySite(['level'], 12, []), survey: {}, lattices };
  const last = Math.max(...grown);
  const [asJudged, fromAll] = await Promise.all(
    [false, true].map((useAll) => fitHistory(input, { ...FIT_DEFAULTS, kind: 'linear', useAll })),
  );
  expect(asJudged!.bundle.channels[0]!.clip[1]).toBeLessThan(last);
  expect(fromAll!.bundle.channels[0]!.clip[1]).toBeGreaterThan(1.5 * last);
  expect(fromAll!.bundle.channels[0]!.scale).toBe(asJudged!.bundle.channels[0]!.scale);
});
