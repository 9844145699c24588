/**
 * Counts that the data's publication and its package state: four motes, two of them indoor, readings every 5 s over about
 * six hours; 149 labelled readings in 18,914 (counted independently from the authors' own text files in the package).
 */
import { readFileSync } from 'node:fs';
import { dirname, join } from 'node:path';
import { describe, expect, it } from 'vitest';
import { CADENCE_MS, dataFile, parseMotes, readMotes } from '../../demo-fleet/sensor-network.ts';

describe('the sensor network data', () => {
  const motes = readMotes();

  it('has four motes, six hours, 149 labelled readings', () => {
    expect(motes.map((mote) => [mote.id, mote.isIndoor, mote.temperature.length])).toEqual([
      [1, true, 4417],
      [2, true, 4417],
      [3, false, 5039],
      [4, false, 5041],
    ]);
    for (const mote of motes) {
      const hours = (mote.temperature.length * CADENCE_MS) / 3_600_000;
      expect(hours).toBeGreaterThan(6);
      expect(hours).toBeLessThan(7.1);
    }
    expect(motes.reduce((sum, mote) => sum + mote.event.reduce((a, b) => a + b, 0), 0)).toBe(149);
  });

  it('says the same as the authors’ text file of mote 1', () => {
    const lines = readFileSync(join(dirname(dataFile()), 'singlehop_indoor_moteid1_data.txt'), 'utf8')
      .trim()
      .split(/\r?\n/);
    for (const [k, line] of lines.slice(1).entries()) {
      const [reading, id, humidity, temperature, label] = line.trim().split(/\s+/).map(Number);
      expect([k + 1, 1, motes[0].humidity[k], motes[0].temperature[k], motes[0].event[k]]).toEqual([
        reading,
        id,
        humidity,
        temperature,
        label,
      ]);
    }
  });

  it('is refused when a column, a number or a reading is amiss', () => {
    const head = 'reading,mote_id,indoor,humidity,temperature,label\n';
    expect(() => parseMotes('a,b\n1,2')).toThrow(/expected the header/);
    expect(() => parseMotes(`${head}1,1,1,x,2,0`)).toThrow(/data\.csv:2: expected six numbers/);
    expect(() => parseMotes(`${head}1,1,1,4,2,0\n3,1,1,4,2,0`)).toThrow(/mote 1: expected reading 2, got 3/);
  });
});
