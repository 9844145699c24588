/**
 * ASHRAE Fundamentals, psychrometrics chapter, tables of moist air and of water at saturation, 101.325 kPa (from memory):
 * °C, saturation pressure kPa, humidity ratio kg/kg, enthalpy kJ/kg dry air, specific volume m³/kg dry air.
 * 0.7 % covers the ideal-gas treatment, which leaves out the enhancement factor that the tables include.
 */
import { describe, expect, it } from 'vitest';
import {
  density,
  doorwayHeat,
  enthalpy,
  humidityRatio,
  saturationPressure,
} from '../../../demo-fleet/plants/moist-air.ts';

const SATURATED = [
  { t: -20, pressure: 0.10326, ratio: 0.0006373, enthalpy: -18.545, volume: 0.7165 },
  { t: 0, pressure: 0.6112, ratio: 0.0037895, enthalpy: 9.473, volume: 0.7781 },
  { t: 20, pressure: 2.3388, ratio: 0.014758, enthalpy: 57.555, volume: 0.8498 },
  { t: 30, pressure: 4.246, ratio: 0.027329, enthalpy: 99.983, volume: 0.8962 },
];

describe.each(SATURATED)('saturated air at $t °C', (row) => {
  it('has the printed pressure, humidity ratio, enthalpy and volume', () => {
    const ratio = humidityRatio(row.t, 1);
    const air = { temperature: row.t, humidityRatio: ratio };
    expect(Math.abs(saturationPressure(row.t) / 1000 / row.pressure - 1)).toBeLessThan(0.002);
    expect(Math.abs(ratio / row.ratio - 1)).toBeLessThan(0.007);
    expect(Math.abs(enthalpy(air) - row.enthalpy)).toBeLessThan(0.007 * Math.max(20, Math.abs(row.enthalpy)));
    expect(Math.abs((1 + ratio) / density(air) / row.volume - 1)).toBeLessThan(0.003);
  });
});

describe('an open doorway', () => {
  const cold = { temperature: -20, humidityRatio: humidityRatio(-20, 0.85) };
  const warm = { temperature: 15, humidityRatio: humidityRatio(15, 0.7) };

  it('lets heat in with area, with the square root of height, and not at all between equal airs', () => {
    const once = doorwayHeat(cold, warm, 4, 2.4);
    expect(once).toBeGreaterThan(20);
    expect(once).toBeLessThan(200);
    expect(doorwayHeat(cold, warm, 8, 2.4)).toBeCloseTo(2 * once, 9);
    expect(doorwayHeat(cold, warm, 4, 9.6)).toBeCloseTo(2 * once, 9);
    expect(doorwayHeat(warm, warm, 4, 2.4)).toBe(0);
    expect(doorwayHeat(warm, cold, 4, 2.4)).toBe(0);
  });
});
