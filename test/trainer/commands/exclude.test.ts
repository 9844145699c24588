/** Time that must not teach, through the commands: fit says what was left out, hindcast leaves out the same, refit too. */
import { readFileSync, writeFileSync } from 'node:fs';
import { join } from 'node:path';
import { expect, it } from 'vitest';
import { decodeBundle, formatSite, type Site } from '../../../protocol/index.ts';
import { fitCommand } from '../../../trainer/commands/fit.ts';
import { hindcastCommand } from '../../../trainer/commands/hindcast.ts';
import type { Archive } from '../../../trainer/desk/archive.ts';
import { absorb } from '../../../trainer/refit/absorb.ts';
import { hearing } from '../../support/command.ts';
import { testFolder } from '../../support/folder.ts';
import { hourlySite, wanderingDays } from '../../support/history.ts';

const NAMES = ['level', 'flow'];
const TICKS = 900;
const HOUR = 3_600_000;
const FIRST = Date.UTC(2024, 0, 1);
const values = wanderingDays(2, TICKS, 31);
const run = hearing();

const excluding = (exclude: Site['exclude']): Site => ({ ...hourlySite(NAMES, 12), exclude });
const span = (from: number, to: number) => ({ fromMs: FIRST + from * HOUR, toMs: FIRST + to * HOUR });
const site = excluding([
  { reason: 'overhaul', signals: null, ...span(100, 196) },
  { reason: 'overhaul', signals: null, ...span(780, 800) },
  { reason: 'probe fouled', signals: ['flow'], ...span(300, 324) },
]);

it('fit and hindcast', async () => {
  const folder = testFolder();
  const at = (name: string): string => join(folder, name);
  const rows = Array.from({ length: TICKS }, (_, t) =>
    [new Date(FIRST + t * HOUR).toISOString(), ...values.map((y) => y[t]!.toFixed(2))].join(','),
  );
  writeFileSync(at('site.yaml'), formatSite(site));
  writeFileSync(at('history.csv'), `${['time', ...NAMES].join(',')}\n${rows.join('\n')}\n`);
  const files = ['--site', at('site.yaml'), '--history', at('history.csv')];
  const said = await run(fitCommand(), ...files, '--out', at('out'));
  expect(said).toContain(
    'Note: The whole plant: 4 d (10.7 %) excluded from learning, bounds and judging for "overhaul"',
  );
  expect(said).toContain('Note: flow: 1 d (2.7 %) excluded');
  expect(said).toMatch(/Skill on 149 origins/);
  expect(readFileSync(at('out/report.html'), 'utf8')).toContain('probe fouled');
  const { provenance } = decodeBundle(readFileSync(at('out/candidate.swc')));
  expect(JSON.parse(provenance.options).excluded.ticksByReason).toEqual({ overhaul: 116, 'probe fouled': 24 });
  const bundle = ['--bundle', at('out/candidate.swc'), ...files];
  const scored = JSON.parse(await run(hindcastCommand(), ...bundle, '--json'));
  const written = JSON.parse(readFileSync(at('out/hindcast.json'), 'utf8'));
  expect(scored.average).toEqual(written.average);
  expect(scored.signals).toEqual(written.signals);
  expect(await run(hindcastCommand(), ...bundle)).toContain('for "probe fouled"');
});

it('refit: the same in the readings of the desk', () => {
  const first = FIRST / HOUR;
  const lattice = { step: 0.01, offset: 0 };
  const archive: Archive = {
    site: site.site,
    tickMs: HOUR,
    ticks: Float64Array.from({ length: TICKS }, (_, t) => first + t),
    channels: NAMES.map((name, c) => {
      const column = values[c]!;
      return { name, role: 'signal', unit: '1', values: column, original: column, lattice };
    }),
    segments: 1,
    corrections: 0,
    bundles: [],
  };
  const { series } = absorb(archive, null, site);
  expect(series.excluded!.isExcluded.reduce((sum, flag) => sum + flag, 0)).toBe(116);
  expect(series.values[1]!.reduce((sum, value) => sum + (Number.isNaN(value) ? 1 : 0), 0)).toBe(24);
  expect(absorb(archive, null, excluding([])).series.excluded).toBeUndefined();
});
