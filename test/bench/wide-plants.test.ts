/** The generators behind the wide cases: the same each time, and what they say they are. */
import { describe, expect, test } from 'vitest';
import { rotor, SENSORS } from './rotor.ts';
import { CAMERA, PIXELS, thermalCamera } from './thermal-camera.ts';

describe('the thermal camera', () => {
  test('the same seed gives the same frames, another seed others', () => {
    const [one, again, other] = [3, 3, 4].map((seed) => {
      const camera = thermalCamera(seed);
      const frame = new Float32Array(PIXELS);
      for (let k = 0; k < 5; k++) camera.next(frame);
      return frame;
    });
    expect(again).toEqual(one);
    expect(other).not.toEqual(one);
  });

  test('the spot is where the scene says, and the sensor is as noisy as it should be', () => {
    const camera = thermalCamera(1);
    const [before, frame] = [new Float32Array(PIXELS), new Float32Array(PIXELS)];
    for (let k = 0; k < 30; k++) {
      before.set(frame);
      camera.next(frame);
    }
    const { spotX, spotY, spotHeat } = camera.scene;
    expect(spotHeat).toBeGreaterThan(0);
    const at = Math.round(spotY) * CAMERA.width + Math.round(spotX);
    expect(frame[at]).toBeGreaterThan(frame[at - 60]! + spotHeat / 2);
    // A corner of the wall, far from spot and housing, less the same a frame before: two draws of 50 mK, and little else.
    let square = 0;
    let mean = 0;
    for (let k = 0; k < 40; k++) mean += (frame[k]! - before[k]!) / 40;
    for (let k = 0; k < 40; k++) square += (frame[k]! - before[k]! - mean) ** 2 / 39;
    expect(Math.sqrt(square / 2)).toBeGreaterThan(0.03);
    expect(Math.sqrt(square / 2)).toBeLessThan(0.08);
  });

  test('every number is a temperature of a workshop', () => {
    const camera = thermalCamera(9);
    const frame = new Float32Array(PIXELS);
    for (let k = 0; k < 50; k++) camera.next(frame);
    expect(Math.min(...frame)).toBeGreaterThan(10);
    expect(Math.max(...frame)).toBeLessThan(60);
  });
});

test('the rotor is seeded, finite and goes round: its readings come back, but not evenly', () => {
  const readings = rotor(4000, 5);
  expect(rotor(4000, 5)).toEqual(readings);
  expect(readings.every(Number.isFinite)).toBe(true);
  // Rising crossings of the mean of one sensor, counted once for each turn or more: about 4000 · 0.13 / 2π turns at least.
  const one = Array.from({ length: 4000 }, (_, t) => readings[t * SENSORS]!);
  const mean = one.reduce((sum, value) => sum + value, 0) / 4000;
  const rising = one.flatMap((value, t) => (t > 0 && value > mean && one[t - 1]! <= mean ? [t] : []));
  expect(rising.length).toBeGreaterThan(50);
  const gaps = rising.slice(1).map((at, k) => at - rising[k]!);
  expect(Math.max(...gaps)).toBeGreaterThan(1.3 * Math.min(...gaps));
});
