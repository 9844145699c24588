import { describe, expect, it } from 'vitest';
import { headLoss } from '../../../demo-fleet/plants/pipe.ts';
import { dutyFlow, WATER_VISCOSITY } from '../../../demo-fleet/plants/pump.ts';
import { DEMO_SITES } from '../../../demo-fleet/plants/sites.ts';

describe('duty of pumps on one main', () => {
  it('lies where pump head meets static head plus friction', () => {
    for (const site of DEMO_SITES) {
      if (site.kind !== 'wet-well') continue;
      const { pump, pipe, dischargeHeight } = site.design;
      for (const running of [1, 2]) {
        const flow = dutyFlow(pump, pipe, running, dischargeHeight - 1.5, 0);
        const each = flow / running;
        const asked = dischargeHeight - 1.5 + headLoss(pipe, flow, WATER_VISCOSITY);
        expect(pump.shutOffHead - pump.slope * each * each).toBeCloseTo(asked, 6);
      }
    }
  });

  it('is more with two pumps, but less than twice as much', () => {
    const site = DEMO_SITES[0];
    if (site.kind !== 'wet-well') throw new Error('expected a wet well first');
    const { pump, pipe } = site.design;
    const one = dutyFlow(pump, pipe, 1, 15, 0);
    const two = dutyFlow(pump, pipe, 2, 15, 0);
    expect(two).toBeGreaterThan(one);
    expect(two).toBeLessThan(2 * one);
  });

  it('is nothing when the static head is out of reach or no pump runs', () => {
    const site = DEMO_SITES[0];
    if (site.kind !== 'wet-well') throw new Error('expected a wet well first');
    expect(dutyFlow(site.design.pump, site.design.pipe, 1, 99, 0)).toBe(0);
    expect(dutyFlow(site.design.pump, site.design.pipe, 0, 10, 0)).toBe(0);
  });
});
