/**
 * Lagged products against values from outside.
 *
 * Monthly deaths from lung diseases in the UK, 1974-1979, men and women: P. J. Diggle, Time Series: A Biostatistical Introduction
 * (Oxford 1990), table A.3, as R 4.2.2 carries it (mdeaths, fdeaths). Autocovariances of their differences by R 4.2.2:
 *   acf(diff(cbind(mdeaths, fdeaths)), type = "covariance", demean = FALSE, lag.max = 5, plot = FALSE)
 * whose entry [k + 1, i, j] is Σ x_i(t + k) x_j(t) / n.
 *
 * Autocovariances of an autoregression of order two: Box & Jenkins, Time Series Analysis (1976), section 3.2.4, equations
 * 3.2.27 and 3.2.28.
 */
import { describe, expect, it } from 'vitest';
import type { Factors } from '../../../trainer/factors/factors.ts';
import { FactorsGatherer } from '../../../trainer/factors/gather.ts';
import { shape } from '../../support/factors-history.ts';
import { gaussians } from '../../support/gaussian.ts';
import { recurrence } from '../../support/sample-bundle.ts';

const MEN = [
  2134, 1863, 1877, 1877, 1492, 1249, 1280, 1131, 1209, 1492, 1621, 1846, 2103, 2137, 2153, 1833, 1403, 1288, 1186,
  1133, 1053, 1347, 1545, 2066, 2020, 2750, 2283, 1479, 1189, 1160, 1113, 970, 999, 1208, 1467, 2059, 2240, 1634, 1722,
  1801, 1246, 1162, 1087, 1013, 959, 1179, 1229, 1655, 2019, 2284, 1942, 1423, 1340, 1187, 1098, 1004, 970, 1140, 1110,
  1812, 2263, 1820, 1846, 1531, 1215, 1075, 1056, 975, 940, 1081, 1294, 1341,
];
const WOMEN = [
  901, 689, 827, 677, 522, 406, 441, 393, 387, 582, 578, 666, 830, 752, 785, 664, 467, 438, 421, 412, 343, 440, 531,
  771, 767, 1141, 896, 532, 447, 420, 376, 330, 357, 445, 546, 764, 862, 660, 663, 643, 502, 392, 411, 348, 387, 385,
  411, 638, 796, 853, 737, 546, 530, 446, 431, 362, 387, 430, 425, 679, 821, 785, 727, 612, 478, 429, 405, 379, 393,
  411, 487, 574,
];
const MEN_AFTER_WOMEN = [
  33753.2676056338, 11295.5492957746, 38.7887323944, -247.338028169, -8521.4225352113, -12270.3521126761,
];
const WOMEN_AFTER_MEN = [
  33753.267605634, 10257.267605634, 2406.591549296, 112.309859155, -7539.830985915, -13046.535211268,
];

/** Factors of some channels; the last reading is given twice, since the newest waits for its next. */
function factorsOf(channels: readonly (readonly number[])[]): Factors {
  const names = channels.map((_, c) => `channel ${c}`);
  const gatherer = new FactorsGatherer({ ...shape, names, units: names, signalCount: names.length });
  const values = channels.map((row) => Float64Array.from([...row, row[row.length - 1]!]));
  const ticks = values[0]!.length;
  const digest = new Uint8Array(32);
  gatherer.take({ tickMs: shape.tickMs, firstTick: 0, ticks, names, signalCount: names.length, values, digest });
  return gatherer.end();
}

describe('lagged products of changes', () => {
  it('of two series are those that R gives', () => {
    const { sums } = factorsOf([MEN, WOMEN]);
    const places = sums.lagged.length / 4;
    for (let k = 0; k < 6; k++) {
      // R prints ten decimals or fewer.
      expect(sums.lagged[places + k]! / 71).toBeCloseTo(MEN_AFTER_WOMEN[k]!, 7);
      expect(sums.lagged[2 * places + k]! / 71).toBeCloseTo(WOMEN_AFTER_MEN[k]!, 7);
    }
    expect(sums.count).toBe(71);
  });

  it('of an autoregression approach its theoretical autocovariances', () => {
    const [a, b, ticks] = [1.3, -0.6, 200_000];
    const next = recurrence(3);
    const draw = gaussians(() => next() / 2 ** 32);
    let [x, before] = [0, 0];
    const values = Array.from({ length: ticks }, () => {
      [x, before] = [a * x + b * before + draw(), x];
      return 100 + x;
    });
    const variance = (1 - b) / (1 + b) / ((1 - b) ** 2 - a ** 2);
    const theory = [variance, (a / (1 - b)) * variance];
    for (let k = 2; k < 22; k++) theory.push(a * theory[k - 1]! + b * theory[k - 2]!);
    const { sums } = factorsOf([values]);
    for (let k = 0; k < 20; k++) {
      const ofChanges = 2 * theory[k]! - theory[Math.abs(k - 1)]! - theory[k + 1]!;
      // Five standard errors of a sample autocovariance of so many ticks are about 0.03 here.
      expect(Math.abs(sums.lagged[k]! / ticks - ofChanges), `lag ${k}`).toBeLessThan(0.03);
    }
    expect(sums.levels[0]! / ticks - (sums.levelSums[0]! / ticks) ** 2).toBeCloseTo(variance, 0);
  });
});
