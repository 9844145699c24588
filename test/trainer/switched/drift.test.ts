/** Drift and hazard against second routes and known answers. */
import { describe, expect, test } from 'vitest';
import { calm, fitDrift, radius } from '../../../trainer/switched/drift.ts';
import { driftBySwitches } from '../../../trainer/switched/jumps.ts';
import { fitHazard, fitLanding } from '../../../trainer/switched/switching.ts';
import { seededNumbers } from '../../support/models.ts';

const noStops = { floor: Number.NEGATIVE_INFINITY, ceiling: Number.POSITIVE_INFINITY, band: 0 };

describe('drift', () => {
  const random = seededNumbers(11);
  const T = 6000;
  const mode = Int8Array.from({ length: T }, (_, t) => Math.floor(t / 25) % 2);
  const z = new Float64Array(T);
  let w = 0;
  for (let t = 1; t < T; t++) {
    w = 0.9 * w + 0.04 * (random() - 0.5);
    z[t] = z[t - 1] + (mode[t] === 0 ? 0.2 : -0.2) - 0.05 * z[t - 1] + w;
  }
  const history = {
    values: [z],
    isRead: [new Uint8Array(T).fill(1)],
    stops: [noStops],
    mode,
    modeCount: 2,
    ticks: T,
  };

  test('of a relaxing signal with a persistent disturbance', () => {
    const { drift, coupling } = fitDrift(history);
    expect(drift[0]).toBeCloseTo(0.2, 1.5);
    expect(drift[1]).toBeCloseTo(-0.2, 1.5);
    for (const b of coupling) expect(b).toBeCloseTo(-0.05, 1.7);
  });

  test('the difference seen at the switches is the one that plain least squares finds without a disturbance', () => {
    const clean = new Float64Array(T);
    for (let t = 1; t < T; t++) clean[t] = clean[t - 1] + (mode[t] === 0 ? 0.05 : -0.05) + 1e-4 * (random() - 0.5);
    const given = { ...history, values: [clean] };
    const found = driftBySwitches(given, { drift: Float64Array.of(0, 0), coupling: new Float64Array(2) });
    const [sums, counts] = [
      [0, 0],
      [0, 0],
    ];
    for (let t = 1; t < T; t++) {
      if (mode[t] !== mode[t - 1]) continue;
      sums[mode[t]] += clean[t] - clean[t - 1];
      counts[mode[t]]++;
    }
    expect(found.drift[0] - found.drift[1]).toBeCloseTo(sums[0] / counts[0] - sums[1] / counts[1], 2);
  });

  test('a mode that would grow is held', () => {
    const coupling = Float64Array.of(0.1, 0.3, 0.2, -0.01);
    expect(radius(coupling, 2)).toBeGreaterThan(1);
    calm(coupling, 2);
    expect(radius(coupling, 2)).toBeLessThanOrEqual(1 + 1e-12);
  });
});

describe('switching', () => {
  test('odds of a plain logistic law are found again', () => {
    const random = seededNumbers(2);
    const count = 20_000;
    const along = Float64Array.from({ length: count }, () => 4 * random() - 2);
    const to = Int8Array.from(along, (x) => (random() < 1 / (1 + Math.exp(-(3 * x - 4))) ? 1 : 0));
    const weights = fitHazard({ along, dwell: new Float64Array(count).fill(1), to, count }, 1, 1, 10);
    expect(weights[0]).toBeCloseTo(-4, 0);
    expect(weights[1]).toBeCloseTo(3, 0);
    expect(weights[2]).toBe(0);
  });

  test('a timer shows in the dwell', () => {
    const count = 4000;
    const dwell = Float64Array.from({ length: count }, (_, t) => (t % 20) + 1);
    const to = Int8Array.from(dwell, (ticks) => (ticks === 20 ? 1 : 0));
    const weights = fitHazard({ along: new Float64Array(count), dwell, to, count }, 1, 1, 40);
    const chance = (ticks: number): number => 1 / (1 + Math.exp(-(weights[0] + (weights[2] * ticks) / 40)));
    expect(chance(20)).toBeGreaterThan(0.7);
    expect(chance(15)).toBeLessThan(0.01);
  });

  test('landing: a line through the switches, drawn to the midpoint where they are few', () => {
    const along = Float64Array.from({ length: 200 }, (_, e) => e / 100);
    const line = fitLanding(
      along,
      along.map((x) => 0.5 - 1.3 * x),
      200,
      1,
    );
    expect(line[1]).toBeCloseTo(-1.3, 1);
    expect(line[0] + line[1]).toBeCloseTo(-0.8, 1);
    expect(Array.from(fitLanding(along, along, 0, 1))).toEqual([0, 0]);
  });
});
