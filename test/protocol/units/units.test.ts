/** Conversions people know by heart come out to the last bit; what is no unit is said to be none. */
import fc from 'fast-check';
import { describe, expect, test } from 'vitest';
import { conversionOf, convert, wrapOf } from '../../../protocol/conversion.ts';
import { convertUnits } from '../../../protocol/units/unit.ts';

const reading = (sentIn: string | null, unit: string, raw: number, scale = 1, offset = 0): number =>
  convert(conversionOf({ sentIn, unit, scale, offset }), raw);

describe('exactly', () => {
  test.each([
    ['[degF]', 212, 'Cel', 100],
    ['[degF]', 32, 'Cel', 0],
    ['[degF]', -40, 'Cel', -40],
    ['Cel', 100, '[degF]', 212],
    ['Cel', 37, '[degF]', 98.6],
    ['K', 273.15, 'Cel', 0],
    ['Cel', 0, 'K', 273.15],
    ['kPa', 1013.25, 'bar', 10.1325],
    ['mbar', 1000, 'bar', 1],
    ['m3/h', 3.6, 'L/s', 1],
    ['kW.h', 1, 'MJ', 3.6],
    ['%', 55, '1', 0.55],
    ['[in_i]', 1, 'mm', 25.4],
    ['min', 90, 'h', 1.5],
  ])('%s %d in %s is %d', (from, value, to, wanted) => expect(reading(from, to, value)).toBe(wanted));

  test('scale and offset come before the unit', () => {
    expect(reading('[degF]', 'Cel', 3120, 0.1, -100)).toBe(100);
    expect(reading(null, 'Cel', 215, 0.1)).toBe(21.5);
    expect(conversionOf({ sentIn: null, unit: 'Cel', scale: 1, offset: 0 })).toBeNull();
  });

  test('a counter begins again where its payload does, in its unit', () => {
    const signal = { unit: 'm3', sentIn: 'L', scale: 10, offset: 0, wrapsAt: 65_536 };
    expect(wrapOf(signal)).toBe(655.36);
    expect(wrapOf({ ...signal, sentIn: null, scale: 1 })).toBe(65_536);
    expect(wrapOf({ ...signal, wrapsAt: null })).toBeNull();
  });
});

describe('refused', () => {
  test.each(['bar', 'kW', '1', 'Cel2'])('%s for a temperature', (code) =>
    expect(convertUnits(code, 'Cel')).toHaveProperty('kind'),
  );

  test.each([
    '',
    ' ',
    'Bar',
    'm^2',
    'kkPa',
    'k',
    'k[psi]',
    'm//s',
    'm/',
    '/',
    'm.',
    '(m',
    'm)',
    '()',
    'm0',
    'm99',
    '2..m',
    'toString',
    '__proto__',
    'constructor',
  ])('%j is no unit', (code) => expect(convertUnits(code, 'm')).toMatchObject({ kind: 'unknown', code }));

  test('what measures something else', () => {
    expect(convertUnits('kPa', 'K')).toEqual({ kind: 'dimension' });
    expect(convertUnits('rad/s', 'Hz')).toEqual({ kind: 'dimension' });
  });

  test('any text gives an answer, never an exception', () => {
    const piece = fc.constantFrom(
      'm',
      'k',
      's',
      'Cel',
      '[degF]',
      '.',
      '/',
      '(',
      ')',
      '{a}',
      '{',
      '}',
      '2',
      '-',
      '10*',
      '[',
      ']',
    );
    fc.assert(
      fc.property(
        fc.oneof(
          fc.string(),
          fc.array(piece, { maxLength: 30 }).map((all) => all.join('')),
        ),
        (code) => {
          const found = convertUnits(code, 'm');
          if (!('kind' in found)) for (const part of Object.values(found)) expect(Number.isFinite(part)).toBe(true);
        },
      ),
      { seed: 20260410, numRuns: 3000 },
    );
  });
});
