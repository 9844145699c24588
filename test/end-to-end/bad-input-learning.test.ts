/**
 * Histories that are bad to learn from, through the commands: each ends in a usable model and a plain word of warning, or
 * in a plain refusal; never in a number that is none, in a hang, or in silence.
 */
import { readFileSync } from 'node:fs';
import { join } from 'node:path';
import { afterAll, describe, expect, it } from 'vitest';
import { decodeBundle } from '../../protocol/index.ts';
import { Folders } from '../support/bad-input.ts';
import { expectFiniteBundle, expectFiniteHindcast } from '../support/finite.ts';
import { wanderingDays } from '../support/history.ts';

const folders = new Folders();
afterAll(() => folders.remove());

const TICKS = 600;
const FIRST_MS = Date.UTC(2024, 0, 1);
const NAMES = ['level', 'flow', 'temp'];
const VALUES = wanderingDays(3, TICKS, 7);
const FIT = 'stillwell fit --site site.yaml --history x.csv --out out --json';

interface Bad {
  /** Text of each field, by column and row; the good history's where absent. */
  readonly field?: (column: number, row: number, value: number) => string;
  readonly rows?: number;
  readonly tick?: string;
  readonly names?: readonly string[];
  readonly inputs?: readonly string[];
}

function filesOf({ field, rows = TICKS, tick = '1h', names = NAMES, inputs = [] }: Bad) {
  const entries = (list: readonly string[]): string => list.map((name) => `  - {name: ${name}}\n`).join('');
  const columns = [...names, ...inputs];
  const lines = Array.from({ length: rows }, (_, row) => {
    const cells = columns.map((_, c) => {
      const value = VALUES[c % 3]![row]!;
      return field === undefined ? value.toFixed(2) : field(c, row, value);
    });
    return [new Date(FIRST_MS + 3.6e6 * row).toISOString(), ...cells].join(',');
  });
  return {
    'site.yaml': `site: mill-lane\ntime_zone: UTC\ntick: ${tick}\nhorizon: 6\nsignals:\n${entries(names)}${
      inputs.length === 0 ? '' : `inputs:\n${entries(inputs)}`
    }`,
    'x.csv': `time,${columns.join(',')}\n${lines.join('\n')}\n`,
  };
}

const only =
  (column: number, text: (value: number, row: number) => string) =>
  (c: number, row: number, value: number): string =>
    c === column ? text(value, row) : value.toFixed(2);

describe('learned, and told what was odd', () => {
  const cases: Record<string, readonly [Bad, RegExp]> = {
    'one signal constant': [
      { field: only(1, () => '7.5') },
      /flow is 7\.5 in all 600 readings: there is nothing to learn from\..*flow keeps one value throughout the learning part/s,
    ],
    'one signal the copy of another': [
      { field: (c, row, value) => (c === 1 ? VALUES[0]![row]! : value).toFixed(2) },
      /flow is a copy of level.*Leave one of them out/,
    ],
    'one signal missing for most of the time': [
      { field: only(1, (value, row) => (row % 9 === 0 ? value.toFixed(2) : '')) },
      /flow has no reading, while others have, for \d+ ticks \(88\.\d %\)/,
    ],
    'one reading of 1e12 in what is learned': [
      { field: only(0, (value, row) => (row === 200 ? '1000000000000' : value.toFixed(2))) },
      /level has 1 reading absurdly far from all others, worst 1000000000000; nothing is learned from them/,
    ],
    'one reading of -1e12 in what judges': [
      { field: only(0, (value, row) => (row === 550 ? '-1e12' : value.toFixed(2))) },
      /level.* absurdly far from all others, worst -1000000000000.*1 reading lies outside .* clipped by the gateway/s,
    ],
    'an input never varied': [
      { inputs: ['valve'], field: only(3, () => '1') },
      /valve keeps one value throughout the learning part/,
    ],
    'a tick ten times too fine': [
      { tick: '6min' },
      /No signal is read more often than every 1 h, but the tick is 6 min.*Take a tick of 1 h in the site file/,
    ],
  };

  it.each(Object.entries(cases))(
    '%s',
    async (_, [bad, words]) => {
      const folder = folders.make(filesOf(bad));
      const { code, out, err } = await folders.run(FIT, folder);
      expect({ code, err }).toEqual({ code: 0, err: '' });
      const { warnings, survey_notes: notes } = JSON.parse(out) as Record<string, string[]>;
      expect([...notes!, ...warnings!].join('\n')).toMatch(words);
      expectFiniteBundle(decodeBundle(readFileSync(join(folder, 'out/candidate.swc'))));
      expectFiniteHindcast(JSON.parse(readFileSync(join(folder, 'out/hindcast.json'), 'utf8')));
    },
    120_000,
  );

  it('units a trillion of billions apart: the same skill as in plain ones', async () => {
    const skillOf = async (field?: Bad['field']): Promise<number[]> => {
      const folder = folders.make(filesOf(field === undefined ? {} : { field }));
      const { code, out, err } = await folders.run(FIT, folder);
      expect({ code, err }).toEqual({ code: 0, err: '' });
      expectFiniteBundle(decodeBundle(readFileSync(join(folder, 'out/candidate.swc'))));
      expectFiniteHindcast(JSON.parse(readFileSync(join(folder, 'out/hindcast.json'), 'utf8')));
      return (JSON.parse(out) as { signals: { skill: number }[] }).signals.map(({ skill }) => skill);
    };
    const plain = await skillOf();
    const apart = await skillOf((c, _, value) =>
      c === 0 ? `${value.toFixed(2)}e-9` : c === 1 ? `${value.toFixed(2)}e9` : value.toFixed(2),
    );
    for (const [i, skill] of apart.entries()) expect(Math.abs(skill - plain[i]!)).toBeLessThan(0.02);
  }, 120_000);
});

describe('refused in one line', () => {
  const cases: Record<string, readonly [Bad, readonly RegExp[]]> = {
    'fifty ticks': [{ rows: 50 }, [/holds 50 ticks.*expected at least \d+/, /Give a longer history/]],
    'one signal all missing': [
      { field: only(1, () => '') },
      [/Signal flow: expected at least 16 readings .* got 0/, /take it out of the site file/],
    ],
    'every signal constant': [{ field: (c) => String(c) }, [/level, flow, temp.*keeps one value throughout/]],
    'a tick a thousand times too fine': [
      { rows: 100, tick: '3s' },
      [/Readings come usually 1200 ticks of 3 s apart.*Take a tick of 1 h in the site file/],
    ],
  };
  it.each(Object.entries(cases))(
    '%s',
    (_, [bad, says]) => folders.refuse({ line: FIT.replace(' --json', ''), files: filesOf(bad), says: [...says] }),
    120_000,
  );
});
