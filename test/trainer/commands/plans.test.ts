/** Plans through the commands: fit learns them, hindcast and show tell of them, as text and as JSON. */
import { readFileSync, writeFileSync } from 'node:fs';
import { join } from 'node:path';
import { expect, test } from 'vitest';
import { formatSite } from '../../../protocol/index.ts';
import { fitCommand } from '../../../trainer/commands/fit.ts';
import { hindcastCommand } from '../../../trainer/commands/hindcast.ts';
import { showCommand } from '../../../trainer/commands/show.ts';
import { plannedHistory, plannedSite } from '../../bench/planned-plant.ts';
import { hearing } from '../../support/command.ts';
import { testFolder } from '../../support/folder.ts';

const TICKS = 2000;
const run = hearing();

interface UnderPlans {
  readonly under_plans: {
    readonly inputs: readonly string[];
    readonly signals: readonly Record<string, number>[];
  };
}

test('from a log to figures under plans', async () => {
  const folder = testFolder();
  const at = (name: string): string => join(folder, name);
  writeFileSync(at('site.yaml'), formatSite(plannedSite()));
  const { series } = plannedHistory(TICKS, 61);
  const rows = Array.from({ length: TICKS }, (_, t) => {
    const time = new Date((series.firstTick + t) * series.tickMs).toISOString();
    return [time, series.values[0]![t]!.toFixed(3), series.values[1]![t]].join(',');
  });
  writeFileSync(at('history.csv'), `${['time,outlet,valve', ...rows].join('\n')}\n`);
  const from = ['--site', at('site.yaml'), '--history', at('history.csv')];

  const said = await run(fitCommand(), ...from, '--kind', 'linear', '--out', at('out'));
  expect(said).toMatch(/Under plans of valve, \d+ origins/);
  const fitted = JSON.parse(readFileSync(at('out/hindcast.json'), 'utf8')) as UnderPlans;
  const [outlet] = fitted.under_plans.signals;
  expect(fitted.under_plans.inputs).toEqual(['valve']);
  expect(outlet!.mse_standardised_what_came).toBeLessThan(0.3 * outlet!.mse_standardised_no_plan!);
  expect(outlet!.mse_standardised_wrong_plan).toBeGreaterThan(outlet!.mse_standardised_no_plan!);

  const bundle = ['--bundle', at('out/candidate.swc')];
  expect(await run(hindcastCommand(), ...bundle, ...from)).toMatch(/Under plans of valve/);
  const scored = JSON.parse(await run(hindcastCommand(), ...bundle, ...from, '--json')) as UnderPlans;
  expect(scored.under_plans).toEqual(fitted.under_plans);
  expect(await run(showCommand(), at('out/candidate.swc'))).toMatch(/plan of +changes +after[\s\S]*valve +outlet/);
});
