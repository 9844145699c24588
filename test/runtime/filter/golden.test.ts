/** Frozen runs of every released arithmetic: they must come out the same, to the bit, on every machine and for ever. */
import { readdirSync, readFileSync } from 'node:fs';
import { fileURLToPath } from 'node:url';
import { ARITHMETIC } from '@stillwell/protocol';
import { describe, expect, test } from 'vitest';
import { type GoldenInput, type GoldenOutput, goldenRun } from '../../support/golden-filter.ts';

const folder = fileURLToPath(new URL('../../vectors/', import.meta.url));
const files = readdirSync(folder).filter((file) => /^filter-(linear|dense)-\d+\.json$/.test(file));

test.each(['linear', 'dense'])('there is a run for today’s arithmetic, %s', (kind) => {
  expect(files).toContain(`filter-${kind}-${ARITHMETIC}.json`);
});

describe.each(files)('%s', (file) => {
  const vector = JSON.parse(readFileSync(folder + file, 'utf8')) as { input: GoldenInput; output: GoldenOutput };

  test('holds 500 ticks with gaps', () => {
    expect(vector.input.readings.length).toBe(500);
    expect(vector.input.readings.flat().filter((k) => k === null).length).toBeGreaterThan(100);
  });

  test('comes out bit-equal', () => {
    expect(goldenRun(vector.input)).toEqual(vector.output);
  });

  test('would show a weight changed by one part in 2^40', () => {
    const readout = [...(vector.input.model.readout as readonly number[])];
    readout[0] *= 1 + 2 ** -40;
    const changed = goldenRun({ ...vector.input, model: { ...vector.input.model, readout } });
    expect(changed).not.toEqual(vector.output);
  });
});
