import { describe, expect, test } from 'vitest';
import { parseSite } from '../../../protocol/index.ts';
import { PlanKeeper } from '../../../runtime/ingest/plans.ts';
import { syntheticModel } from '../../support/models.ts';

const TICK = 60_000;
const NOW = Date.UTC(2026, 2, 1, 12);
const T = NOW / TICK;
const H = 6;
const site = parseSite(
  `site: a
time_zone: UTC
tick: 1min
horizon: ${H}
signals: [{name: level}]
inputs:
  - {name: pump, plan_topic: plan/pump, range: [0, 30]}
  - {name: rain, plan_topic: plan/+/rain, aggregate: sum}
  - {name: lamp}
`,
);
const model = syntheticModel({ signals: ['level'], inputs: ['pump', 'rain', 'lamp'], horizon: H });
const json = (value: unknown): Uint8Array => new TextEncoder().encode(JSON.stringify(value));
const at = (minutes: number): string => new Date(NOW + minutes * TICK).toISOString();
const plan = (values: readonly number[], more: object = {}): Uint8Array =>
  json({ start: at(1), step: '1min', values, ...more });
/** The plan after tick `tick` in units, NaN where nothing is planned; one row an input. */
const planned = (keeper: PlanKeeper, tick: number): number[][] => {
  const out = new Float64Array(3 * H);
  keeper.fill(model, tick, out);
  return [0, 1, 2].map((u) =>
    [...out.subarray(u * H, (u + 1) * H)].map(
      (z) => Math.round((model.mean[1 + u]! + model.scale[1 + u]! * z) * 1e6) / 1e6,
    ),
  );
};
const none = new Array(H).fill(Number.NaN);

describe('plans', () => {
  test('reach the input of their topic, standardised, and end where they end', () => {
    const keeper = new PlanKeeper(site);
    expect(keeper.filters).toEqual(['plan/pump', 'plan/+/rain']);
    expect(keeper.take('plan/pump', plan([5, 6, 7]), NOW).map(({ input, kind }) => [input, kind])).toEqual([
      ['pump', 'taken'],
    ]);
    expect(planned(keeper, T)).toEqual([[5, 6, 7, Number.NaN, Number.NaN, Number.NaN], none, none]);
    expect(planned(keeper, T + 2)[0]).toEqual([7, ...none.slice(1)]);
    expect(keeper.inForce(0)!.madeAtMs).toBe(NOW);
    expect(planned(keeper, T + 3)[0]).toEqual(none);
    expect(keeper.inForce(0)).toBeNull();
    expect(keeper.fill(model, T + 3, new Float64Array(3 * H))).toBe(false);
  });

  test('amounts of a finer plan add up', () => {
    const keeper = new PlanKeeper(site);
    keeper.take('plan/east/rain', json({ start: at(1), step: '20s', values: [1, 2, 3, 0, 0, 4] }), NOW);
    expect(planned(keeper, T)[1]!.slice(0, 3)).toEqual([6, 4, Number.NaN]);
  });

  test('the newest rules; the same bytes again say nothing; no bytes take it back', () => {
    const keeper = new PlanKeeper(site);
    const take = (payload: Uint8Array, nowMs = NOW): string => keeper.take('plan/pump', payload, nowMs)[0]!.kind;
    expect([take(plan([5])), take(plan([5]), NOW + 9), take(plan([6]))]).toEqual(['taken', 'known', 'taken']);
    expect(planned(keeper, T)[0]![0]).toBe(6);
    expect(take(new Uint8Array(0))).toBe('withdrawn');
    expect(planned(keeper, T)[0]).toEqual(none);
    expect(take(plan([6]))).toBe('taken');
    expect(keeper.taken).toBe(3);
  });

  test('one made before the ruling one is refused; its age is counted from when it was made', () => {
    const keeper = new PlanKeeper(site);
    keeper.take('plan/pump', plan([5], { issued_at: at(-3) }), NOW);
    expect(keeper.inForce(0)!.madeAtMs).toBe(NOW - 3 * TICK);
    const [older] = keeper.take('plan/pump', plan([6], { issued_at: at(-4) }), NOW);
    expect(older).toMatchObject({ kind: 'refused', cause: 'stale' });
    expect(older!.text).toBe(
      'plan: issued_at: expected 2026-03-01T11:57:00.000Z or later, when the ruling plan was made, got 2026-03-01T11:56:00.000Z',
    );
    expect(planned(keeper, T)[0]![0]).toBe(5);
    // A maker's clock ahead of ours must not shut out all plans to come.
    keeper.take('plan/pump', plan([7], { issued_at: at(90) }), NOW);
    expect(keeper.inForce(0)!.madeAtMs).toBe(NOW);
    expect(keeper.take('plan/pump', plan([8], { issued_at: at(1) }), NOW + TICK)[0]!.kind).toBe('taken');
  });

  test('bad ones are counted by cause, once for the same bytes, and leave the ruling one', () => {
    const keeper = new PlanKeeper(site);
    keeper.take('plan/pump', plan([5]), NOW);
    const bad = [
      plan([31]),
      plan([]),
      new TextEncoder().encode('soon'),
      json({ start: at(-99), step: 1, values: [1] }),
    ];
    for (const payload of [...bad, bad.at(-1)!]) keeper.take('plan/pump', payload, NOW);
    expect(keeper.refused).toEqual({ range: 1, fields: 1, syntax: 1, past: 1 });
    expect(planned(keeper, T)[0]![0]).toBe(5);
    expect(keeper.take('plan/nobody', plan([5]), NOW)).toEqual([]);
  });

  test('before any reading has told the time, none is too far off', () => {
    const keeper = new PlanKeeper(site);
    expect(keeper.take('plan/pump', plan([5]), null)[0]!.kind).toBe('taken');
    expect(keeper.inForce(0)!.madeAtMs).toBeNaN();
  });

  test('what came is held against what was planned', () => {
    const keeper = new PlanKeeper(site);
    keeper.take('plan/pump', plan(new Array(30).fill(5)), NOW);
    const out = new Float64Array(3 * H);
    for (let t = T; t < T + 20; t++) {
      keeper.came(t, Float64Array.of(0, 8, 0, 0));
      keeper.fill(model, t, out);
    }
    expect(keeper.record(0).error).toBe(3);
    expect(keeper.record(1).error).toBeNull();
  });

  test('a bundle with another horizon than the site file', () => {
    const keeper = new PlanKeeper(site);
    const longer = syntheticModel({ signals: ['level'], inputs: ['pump', 'rain', 'lamp'], horizon: 9 });
    keeper.take('plan/pump', plan(new Array(30).fill(5)), NOW);
    const out = new Float64Array(27);
    expect(keeper.fill(longer, T, out)).toBe(true);
    expect(out.subarray(0, 9).every((z) => Math.abs(longer.mean[1]! + longer.scale[1]! * z - 5) < 1e-9)).toBe(true);
  });
});
