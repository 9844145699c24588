import { describe, expect, it } from 'vitest';
import { DEMO_SITES, type DemoChannel } from '../../demo-fleet/plants/sites.ts';
import { openRandom } from '../../demo-fleet/random.ts';
import { onLattice, Sensor } from '../../demo-fleet/sensors.ts';

const level = DEMO_SITES[0].channels[0];
const rain = DEMO_SITES[0].channels[3];

describe('a sensor', () => {
  it('speaks in whole steps, written as short decimals', () => {
    const sensor = new Sensor(level, openRandom(1, 'a'));
    for (let i = 0; i < 2000; i++) {
      const value = sensor.read(1 + i / 1000);
      expect(Math.abs(value / level.resolution - Math.round(value / level.resolution))).toBeLessThan(1e-9);
      expect(String(value).length).toBeLessThanOrEqual(5);
    }
  });

  it('has the stated noise before rounding', () => {
    const sensor = new Sensor({ ...level, resolution: 1e-6 }, openRandom(1, 'b'));
    let sum = 0;
    let squares = 0;
    const n = 20_000;
    for (let i = 0; i < n; i++) {
      const error = sensor.read(2) - 2;
      sum += error;
      squares += error * error;
    }
    // Five standard errors of the mean; 5 % is ten of the standard deviation.
    expect(Math.abs(sum / n)).toBeLessThan((5 * level.noise) / Math.sqrt(n));
    expect(Math.abs(Math.sqrt(squares / n) / level.noise - 1)).toBeLessThan(0.05);
  });

  it('stays inside its range, repeats itself while stuck and carries its drift', () => {
    const sensor = new Sensor({ ...level, noise: 0 }, openRandom(1, 'c'));
    expect(sensor.read(99)).toBe(level.range[1]);
    sensor.isStuck = true;
    expect(sensor.read(1)).toBe(level.range[1]);
    sensor.isStuck = false;
    sensor.offset = 0.25;
    expect(sensor.read(1)).toBe(1.25);
  });

  it('counts rain in whole tips and loses none of it', () => {
    const sensor = new Sensor(rain, openRandom(1, 'd'));
    let told = 0;
    for (let i = 0; i < 1000; i++) told += sensor.read(0.013);
    expect(told).toBeGreaterThan(13 - rain.resolution - 1e-9);
    expect(told).toBeLessThanOrEqual(13 + 1e-9);
  });

  it('rounds to the nearest step', () => {
    const channel: DemoChannel = { ...level, resolution: 0.1 };
    expect(onLattice(0.3000001, channel)).toBe(0.3);
    expect(onLattice(0.36, channel)).toBe(0.4);
  });
});
