/** A bundle and a model of the switched kind, learned from the tank of switched-plant.ts. */
import type { Bundle } from '@stillwell/protocol';
import { modelFromBundle, type SwitchedModel } from '@stillwell/runtime/filter';
import { fitCorrection } from '../../trainer/switched/correction.ts';
import { learnSwitched } from '../../trainer/switched/learn.ts';
import { switchedTensors } from '../../trainer/switched/round.ts';
import { syntheticBundle } from './models.ts';
import { tankHistory, tankInput } from './switched-plant.ts';

/** Horizon of the tank's model. */
export const TANK_HORIZON = 30;

let kept: Bundle | null = null;

/** The bundle: a small synthetic bank under a section learned from 3000 ticks. */
export function tankBundle(): Bundle {
  if (kept !== null) return kept;
  const base = syntheticBundle({
    signals: ['level', 'current'],
    horizon: TANK_HORIZON,
    seasonalPeriod: 0,
    seasonalBins: 1,
    rejectSd: 1e6,
  });
  const { input, scaling } = tankInput(tankHistory({ ticks: 3200 }), 3000, TANK_HORIZON);
  const section = learnSwitched(input);
  if (section === null) throw new Error('the tank has modes');
  const low = Float64Array.of(-8, -8);
  const high = Float64Array.of(8, 8);
  const correction = fitCorrection(section, input, { low, high });
  const channels = base.channels.map((channel, c) => ({
    ...channel,
    lattice: { step: 1e-6, offset: 0 },
    ...scaling[c],
    clip: [scaling[c].mean - 8 * scaling[c].scale, scaling[c].mean + 8 * scaling[c].scale] as const,
    limits: { highHigh: null, high: null, low: null, lowLow: null },
  }));
  kept = {
    ...base,
    kind: 'switched',
    channels,
    switched: switchedTensors({ ...section, correction }, TANK_HORIZON),
  };
  return kept;
}

/** Its model. */
export function tankModel(): SwitchedModel {
  return modelFromBundle(tankBundle()) as SwitchedModel;
}
