/** Features carried over a block: to the bit what they are tick by tick. */
import { expect, test } from 'vitest';
import { carryBlock } from '../../../trainer/identify/carry-block.ts';
import { advancePoles, flattenPoles } from '../../../trainer/identify/poles.ts';

const BANKS = [
  { decays: [0.9, 0.5], resonators: [] },
  { decays: [0.97], resonators: [[0.8, 0.3] as const, [0.2, -0.9] as const] },
  { decays: [0.9, 0.6, 0.3], resonators: [[0.7, 0.6] as const], hasLevel: true },
  { decays: [0.8], resonators: [], hasLevel: true },
];

test.each(BANKS.flatMap((bank) => [1, 3, 4, 8].map((nc) => [bank, nc] as const)))('%o, %i channels', (some, nc) => {
  const poles = flattenPoles({ halfLives: [], lags: [], ...some } as unknown as Parameters<typeof flattenPoles>[0]);
  const [ticks, from, to, horizon] = [150, 4, 103, 7];
  const changes = Array.from({ length: nc }, (_, c) =>
    Float64Array.from({ length: ticks }, (_, t) => (t % 11 === c ? 0 : Math.sin(1 + t * (c + 1.3)))),
  );
  const perChannel = some.decays.length + 2 * some.resonators.length + (some.hasLevel === true ? 1 : 0);
  const p = nc * perChannel;
  const phi = Float64Array.from({ length: p }, (_, f) => Math.cos(f));
  const slow = phi.slice();
  const expected = new Float64Array(nc * p);
  for (let t = from; t < to; t++) {
    advancePoles(poles, slow, changes, t);
    for (let i = 0; i < nc; i++) for (let f = 0; f < p; f++) expected[i * p + f] += slow[f] * changes[i][t + horizon];
  }
  const sums = carryBlock(poles, phi, changes, from, to, horizon);
  expect(Array.from(phi)).toEqual(Array.from(slow));
  expect(Array.from(sums)).toEqual(Array.from(expected));
});
