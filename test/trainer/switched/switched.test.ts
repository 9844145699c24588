/** The switched kind through a whole fit: chosen where it helps, refused where it cannot, learned again from all. */
import { parseSite } from '@stillwell/protocol';
import { describe, expect, test } from 'vitest';
import { FIT_DEFAULTS, type FitOptions, fit as fitHistory } from '../../../trainer/pipeline.ts';
import { seededNumbers } from '../../support/models.ts';
import { tankHistory } from '../../support/switched-plant.ts';

const HORIZON = 12;

function fitted(values: readonly Float64Array[], options: Partial<FitOptions>) {
  const names = ['level', 'current', 'extra'].slice(0, values.length);
  const signals = names.flatMap((name) => [`  - name: ${name}`, "    unit: '1'"]);
  const head = ['site: tank', 'class: tank', 'time_zone: UTC', 'tick: 20s', `horizon: ${HORIZON}`, 'signals:'];
  const series = {
    tickMs: 20_000,
    firstTick: 85_000_000,
    ticks: values[0].length,
    names,
    signalCount: names.length,
    values,
    digest: new Uint8Array(32),
  };
  const site = parseSite(`${[...head, ...signals].join('\n')}\n`, 'test site');
  const lattices = names.map(() => ({ step: 1e-6, offset: 0 }));
  const onLattice = values.map((y) => y.map((value) => 1e-6 * Math.round(value / 1e-6)));
  return fitHistory(
    { series: { ...series, values: onLattice }, site, survey: {}, lattices },
    { ...FIT_DEFAULTS, ...options },
  );
}

describe('a tank, its pump, and a signal that has nothing to do with them', () => {
  const [level, current] = tankHistory({ ticks: 2400, seed: 12 });
  const random = seededNumbers(8);
  let x = 0;
  const extra = Float64Array.from({ length: 2400 }, () => {
    x = 0.95 * x + random() - 0.5;
    return x;
  });

  test('is given to the switched kind, which leaves the stranger to the linear model under it', async () => {
    const result = await fitted([level, current, extra], { kind: 'auto' });
    expect(result.bundle.kind).toBe('switched');
    expect(result.bundle.switched!.forecast).toEqual([0, 1]);
    expect(result.bundle.switched!.driven).toEqual([0]);
    expect(result.document.length).toBeLessThan(24 * 1024);
    expect(result.audit.ratio).toBeLessThan(1.01);
    expect(result.verdicts.hasSkill).toBe(true);
  }, 30_000);

  test('the same history gives the same bytes, learned again from all of it for the same signals', async () => {
    const one = await fitted([level, current], { kind: 'switched', useAll: true });
    const two = await fitted([level, current], { kind: 'switched', useAll: true });
    expect(two.document).toEqual(one.document);
    expect(one.bundle.switched!.forecast).toEqual([0, 1]);
  }, 30_000);

  test('asked for where there are no modes it is refused in a sentence', async () => {
    await expect(fitted([extra], { kind: 'switched' })).rejects.toThrow('--kind switched');
  });
});
