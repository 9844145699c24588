import { describe, expect, it } from 'vitest';
import { defrostTimesOf } from '../../../demo-fleet/plants/build.ts';
import { ColdStore, type ColdStoreDesign } from '../../../demo-fleet/plants/cold-store.ts';
import type { DefrostTimes } from '../../../demo-fleet/plants/defrost.ts';
import { DEMO_SITES } from '../../../demo-fleet/plants/sites.ts';
import { openRandom } from '../../../demo-fleet/random.ts';

const START = Date.UTC(2025, 3, 7);
const designs = DEMO_SITES.flatMap((site) =>
  site.kind === 'cold-store' ? [{ name: site.name, design: site.design, defrosts: defrostTimesOf(site, 3) }] : [],
);

function runDays(
  design: ColdStoreDesign,
  defrosts: DefrostTimes | null,
  days: number,
  wear = 0,
): { store: ColdStore; startEnergy: number; room: number[]; starts: number } {
  const store = new ColdStore(design, openRandom(3, 'test'), defrosts);
  store.wear(wear);
  const startEnergy = store.stored;
  const room: number[] = [];
  let starts = 0;
  let was = false;
  for (let tick = 0; tick < (days * 86_400_000) / design.tickMs; tick++) {
    store.step(START + tick * design.tickMs);
    room.push(store.values[0]);
    if (store.cooling && !was) starts++;
    was = store.cooling;
  }
  return { store, startEnergy, room, starts };
}

/** Imbalance as a share of the heat removed. */
const imbalance = (store: ColdStore, startEnergy: number): number => {
  const { wall, doors, fans, defrost, removed } = store.ledger;
  return Math.abs(store.stored - startEnergy - (wall + doors + fans + defrost - removed)) / removed;
};

describe.each(designs)('cold store $name', ({ design, defrosts }) => {
  it('keeps its heat: flows and stored energy close to 1e-9 of the heat removed over ten days', () => {
    const { store, startEnergy } = runDays(design, defrosts, 10);
    expect(store.ledger.removed).toBeGreaterThan(0);
    // Heaters act where there are defrosts, so that the balance is kept with them in it.
    expect(store.ledger.defrost > 0).toBe(defrosts !== null);
    expect(imbalance(store, startEnergy)).toBeLessThan(1e-9);
    // The comparator sees one kilojoule in a thousand million gone missing.
    store.ledger.doors += 1e-8 * store.ledger.removed;
    expect(imbalance(store, startEnergy)).toBeGreaterThan(1e-9);
  });

  it('cycles about its set-point', () => {
    const { room, starts } = runDays(design, defrosts, 5);
    const mean = room.reduce((sum, value) => sum + value, 0) / room.length;
    expect(Math.abs(mean - design.setPoint)).toBeLessThan(design.deadBand / 2);
    expect(starts).toBeGreaterThan(25);
  });

  it('moves more heat per kWh than it takes, and less than Carnot allows', () => {
    const { store } = runDays(design, defrosts, 5);
    const performance = store.ledger.removed / store.ledger.compressor;
    // Carnot's bound between the coldest evaporating and the mildest condensing temperature of the run.
    const carnot = (273.15 + design.setPoint) / (design.condenserRise + 5);
    expect(performance).toBeGreaterThan(1);
    expect(performance).toBeLessThan(carnot);
  });

  it('works harder with a worn door seal', () => {
    const fresh = runDays(design, defrosts, 3);
    const worn = runDays(design, defrosts, 3, 1);
    expect(worn.store.ledger.compressor).toBeGreaterThan(1.1 * fresh.store.ledger.compressor);
  });
});
