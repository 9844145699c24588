/** The commands fit and hindcast from files to files, and their refusals; nothing half-written. */
import { existsSync, readdirSync, readFileSync, writeFileSync } from 'node:fs';
import { join } from 'node:path';
import type { Command } from 'commander';
import { describe, expect, it } from 'vitest';
import { decodeBundle, formatSite } from '../../../protocol/index.ts';
import { fitCommand } from '../../../trainer/commands/fit.ts';
import { hindcastCommand } from '../../../trainer/commands/hindcast.ts';
import { hearing } from '../../support/command.ts';
import { testFolder } from '../../support/folder.ts';
import { hourlySite, wanderingDays } from '../../support/history.ts';

const names = ['level', 'flow'];
const TICKS = 900;

const run = hearing();

function plant(horizon = 12): { at: (name: string) => string; site: string; history: string } {
  const folder = testFolder();
  const at = (name: string): string => join(folder, name);
  writeFileSync(at('site.yaml'), formatSite(hourlySite(names, horizon)));
  const values = wanderingDays(2, TICKS, 31);
  const lines = Array.from({ length: TICKS }, (_, t) => {
    const time = new Date(Date.UTC(2024, 0, 1) + t * 3_600_000).toISOString();
    return [time, ...values.map((y) => y[t]!.toFixed(2))].join(',');
  });
  writeFileSync(at('history.csv'), `${['time', ...names].join(',')}\n${lines.join('\n')}\n`);
  return { at, site: at('site.yaml'), history: at('history.csv') };
}

interface HindcastText {
  readonly from: string;
  readonly seen_share: number;
  readonly average: { readonly mse_standardised: number };
  readonly signals: readonly { readonly signal: string; readonly horizons: readonly { readonly mse: number }[] }[];
}

describe('fit and hindcast', () => {
  it('writes a candidate that the other command scores the same', async () => {
    const { at, site, history } = plant();
    const text = await run(fitCommand(), '--site', site, '--history', history, '--out', at('out'));
    expect(readdirSync(at('out')).sort()).toEqual([
      'candidate.swc',
      'factors.swf',
      'hindcast.json',
      'report.html',
      'survey.json',
    ]);
    expect(text).toMatch(/Skill on \d+ origins/);
    expect(text).toMatch(/Advisory estimate/);
    const written = JSON.parse(readFileSync(at('out/hindcast.json'), 'utf8')) as HindcastText;
    const bundle = ['--bundle', at('out/candidate.swc'), '--site', site, '--history', history];
    const scored = JSON.parse(await run(hindcastCommand(), ...bundle, '--json')) as HindcastText;
    expect(scored.from).toBe(new Date(Date.UTC(2024, 0, 1) + 720 * 3_600_000).toISOString());
    expect(scored.average).toEqual(written.average);
    expect(scored.signals).toEqual(written.signals);
    expect(scored.signals[1]!.signal).toBe('flow');
    expect(scored.seen_share).toBe(0);
    // 2024-01-27 is tick 624: 96 ticks before 720, the first unseen one, of 276 judged.
    expect(await run(hindcastCommand(), ...bundle, '--from', '2024-01-27')).toMatch(
      /2024-01-27T00:00:00[\s\S]*Note: 34\.8 % of the judged time is time the bundle learned or was calibrated from/,
    );
    expect(await run(hindcastCommand(), ...bundle, '--from', '2024-02-05')).not.toMatch(/Note:/);
  });

  it('cuts the history where it is told, and learns nothing from beyond', async () => {
    const { at, site, history } = plant();
    const asked = ['--site', site, '--history', history, '--until', '2024-02-01', '--kind', 'linear', '--json'];
    const result = JSON.parse(await run(fitCommand(), ...asked, '--out', at('out'))) as { bytes: number };
    const bundle = decodeBundle(readFileSync(at('out/candidate.swc')));
    expect(bundle.provenance.ticks).toBe(31 * 24);
    expect(result.bytes).toBe(readFileSync(at('out/candidate.swc')).length);
  });
});

describe('refusals', () => {
  const refused = async (command: Command, ...args: string[]): Promise<string> => {
    try {
      await run(command, ...args);
    } catch (error) {
      return (error as Error).message;
    }
    throw new Error('expected a refusal, got acceptance');
  };

  it('leaves nothing behind', async () => {
    const { at, site, history } = plant();
    const tooFar = plant(950);
    expect(await refused(fitCommand(), '--site', tooFar.site, '--history', history, '--out', at('out'))).toMatch(
      /horizon of 950 ticks is longer than the history of 900 ticks/,
    );
    expect(await refused(fitCommand(), '--site', site, '--history', at('none.csv'), '--out', at('out'))).toMatch(
      /none\.csv/,
    );
    expect(existsSync(at('out'))).toBe(false);
  });

  it('says what a time looks like', async () => {
    const { at, site, history } = plant();
    const asked = ['--site', site, '--history', history, '--out', at('out')];
    expect(await refused(fitCommand(), ...asked, '--until', 'yesterday')).toMatch(
      /--until: expected a time such as 2026/,
    );
    expect(await refused(fitCommand(), ...asked, '--learn-share', '1.5')).toMatch(/share between 0 and 1/);
  });

  it('names the difference between bundle and site, and a history that ends too soon', async () => {
    const { at, site, history } = plant();
    await run(fitCommand(), '--site', site, '--history', history, '--kind', 'linear', '--out', at('out'));
    const bundle = ['--bundle', at('out/candidate.swc'), '--history', history];
    writeFileSync(at('other.yaml'), formatSite(hourlySite(['level', 'head'], 12)));
    expect(await refused(hindcastCommand(), ...bundle, '--site', at('other.yaml'))).toMatch(/other readings .*head/);
    expect(await refused(hindcastCommand(), ...bundle, '--site', site, '--from', '2024-02-07T08:00Z')).toMatch(
      /--from: expected a time/,
    );
    expect(await refused(hindcastCommand(), ...bundle, '--site', site, '--from', '2024-02-07T06:00')).toMatch(
      /expected at least 12 ticks \(one horizon\) after 2024-02-07T06:00:00.000Z, the time given with --from, got 6/,
    );
  });

  it('shows an example', () => {
    let help = '';
    for (const command of [fitCommand(), hindcastCommand()]) {
      command.configureOutput({ writeOut: (text) => (help += text) }).outputHelp();
    }
    expect(help).toMatch(/stillwell fit --site/);
    expect(help).toMatch(/stillwell hindcast --bundle/);
  });
});
