/**
 * Two worked examples of White, Fluid Mechanics, 4th edition (1999), section 6.4 (from memory):
 * example 6.7, water in 200 ft of asphalted cast-iron pipe of 6 in at 6 ft/s: f = 0.0200, loss 4.5 ft;
 * example 6.8, oil (ν = 1e-5 m²/s) at 0.2 m³/s in 500 m of 200 mm cast iron: f = 0.0225, loss 116 m (117 in later editions).
 * White reads f from the Moody chart; 2 % covers the reading and Swamee and Jain's own error.
 * Colebrook's equation itself, solved by iteration, is the second route over the turbulent range.
 */
import { describe, expect, it } from 'vitest';
import { frictionFactor, headLoss } from '../../../demo-fleet/plants/pipe.ts';

const FOOT = 0.3048;

/** Colebrook (1939): 1/√f = -2 log10(ε/D/3.7 + 2.51/(Re √f)). */
function colebrook(reynolds: number, relativeRoughness: number): number {
  let inverse = 8;
  for (let i = 0; i < 60; i++) inverse = -2 * Math.log10(relativeRoughness / 3.7 + (2.51 * inverse) / reynolds);
  return 1 / (inverse * inverse);
}

const within = (got: number, expected: number, share: number): void =>
  expect(Math.abs(got / expected - 1), `${got} against ${expected}`).toBeLessThan(share);

describe('head loss in pipes', () => {
  it('agrees with White example 6.7', () => {
    const pipe = { length: 200 * FOOT, diameter: 0.5 * FOOT, roughness: 0.0004 * FOOT, minorLoss: 0 };
    const flow = 6 * FOOT * ((Math.PI * pipe.diameter ** 2) / 4);
    const viscosity = 1.1e-5 * FOOT * FOOT;
    within(frictionFactor((6 * FOOT * pipe.diameter) / viscosity, 0.0008), 0.02, 0.02);
    within(headLoss(pipe, flow, viscosity) / FOOT, 4.5, 0.02);
  });

  it('agrees with White example 6.8', () => {
    const pipe = { length: 500, diameter: 0.2, roughness: 0.00026, minorLoss: 0 };
    within(frictionFactor(128_000, 0.0013), 0.0225, 0.02);
    within(headLoss(pipe, 0.2, 1e-5), 116.5, 0.02);
  });

  it('stays within 3 % of Colebrook over the turbulent range', () => {
    for (const reynolds of [5e3, 2e4, 1e5, 1e6, 1e8])
      for (const roughness of [1e-6, 1e-4, 1e-3, 1e-2])
        within(frictionFactor(reynolds, roughness), colebrook(reynolds, roughness), 0.03);
  });

  it('is Poiseuille below Re 2300: f = 64/Re', () => {
    expect(frictionFactor(1000, 0.01)).toBe(0.064);
  });
});
