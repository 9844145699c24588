/** Models of every kind as they are fitted: the document holds the very model that was chosen, and a gateway takes it. */
import { decodeBundle, encodeBundle, sealBundle } from '@stillwell/protocol';
import { type Model, modelFromBundle, runProbe } from '@stillwell/runtime/filter';
import { describe, expect, test } from 'vitest';
import { checkBundle } from '../../runtime/bundle/load.ts';
import { composeBundle, placeholderJudge } from '../../trainer/compose.ts';
import { tryDriven } from '../../trainer/featured/driven.ts';
import { tryFeatured } from '../../trainer/featured/featured.ts';
import type { Series } from '../../trainer/history/series.ts';
import type { Attempt, Candidate, TryKind } from '../../trainer/kinds/candidate.ts';
import { tryDense } from '../../trainer/kinds/dense.ts';
import { tryLinear } from '../../trainer/kinds/linear.ts';
import { openCalibration } from '../../trainer/quantise/float-model.ts';
import { trySwitched } from '../../trainer/switched/switched.ts';
import { attemptOf } from '../support/attempt.ts';
import { seriesOf, wanderingDays } from '../support/history.ts';
import { seededNumbers } from '../support/models.ts';
import { author, trusted } from '../support/running-site.ts';
import { tankHistory } from '../support/switched-plant.ts';
import { runTanks } from '../support/tanks.ts';
import { chaoticSeries } from '../trainer/featured/support.ts';

const days = seriesOf(['level', 'flow', 'outdoor'], wanderingDays(3, 1000, 21), 2);
const tanks = runTanks({ seed: 1, ticks: 500, rim: Number.POSITIVE_INFINITY, noise: 0.03 });

/** A week drawn once, and a wander: no bank is long enough for it. */
function drawnWeeks(ticks: number): Float64Array {
  const random = seededNumbers(6);
  const week = Float64Array.from({ length: 168 }, random);
  let wander = 0;
  return Float64Array.from({ length: ticks }, (_, t) => {
    wander = 0.9 * wander + 0.3 * (random() - 0.5);
    return Math.round(100 * (5 * week[t % 168]! + wander)) / 100;
  });
}

const CASES: readonly (readonly [Model['kind'], TryKind, Series, number, number])[] = [
  ['linear', tryLinear, days, 12, 0.01],
  ['linear', tryLinear, seriesOf(['weeks'], [drawnWeeks(1400)]), 12, 0.01],
  ['dense', tryDense, seriesOf(['weeks'], [drawnWeeks(1400)]), 12, 0.01],
  ['dense', tryDense, days, 12, 0.01],
  ['featured', tryFeatured, chaoticSeries(1500), 8, 1e-4],
  ['switched', trySwitched, seriesOf(['level', 'current'], tankHistory({ ticks: 1800, seed: 12 })), 12, 1e-6],
  ['driven', tryDriven, seriesOf(['level', 'pump'], [tanks.level, tanks.pump], 1), 20, 1e-3],
];

/** The document of a candidate, before calibration. */
function documentOf({ around, options, series, site, split }: Attempt, candidate: Candidate): Uint8Array {
  const lattices = around.lattices;
  const cells = around.signalCount * around.horizon;
  return encodeBundle(
    composeBundle({
      input: { series, site, survey: {}, lattices },
      options,
      around,
      sections: candidate.sections,
      calibration: openCalibration(around.scalings.length, cells),
      judge: placeholderJudge(series.names.slice(0, around.signalCount), [1], 1, null),
      learnedToTick: split.learn.toTick,
      settled: candidate.settled,
    }),
  );
}

test('one of them has a round', () => {
  expect(attemptOf(CASES[1]![2], 12, 0.01).taught.round).not.toBeNull();
});

describe.each(CASES)('%s', (kind, tryKind, series, horizon, step) => {
  const attempt = attemptOf(series, horizon, step);
  const candidate = tryKind(attempt);

  test('the document holds the model that was chosen, to the bit, learned again too, and a gateway takes it', () => {
    if (candidate === null) throw new Error('expected a candidate');
    for (const one of [candidate, candidate.again(series.ticks)]) {
      const document = documentOf(attempt, one);
      const model = modelFromBundle(decodeBundle(document));
      expect(model.kind).toBe(kind);
      // The season's table is rounded in the document alone, bounds have no width yet.
      const chosen: Model = { ...one.rounded, seasonal: model.seasonal, radius: model.radius };
      const [theirs, ours] = [model, chosen].map((of) => Buffer.from(runProbe(of, 3, 300).outputs));
      expect(theirs!.equals(ours!)).toBe(true);
      const sealed = sealBundle(document, { epoch: 1, sequence: 1 }, [author]);
      const context = { site: attempt.site, trusted, highWater: [], isOwn: false };
      expect(checkBundle(sealed, context)).toMatchObject({ ok: true });
    }
  });
});
