/** A fleet in which almost everything is wrong, through the command: what is right is fitted, the rest is said, site by site. */
import { spawn } from 'node:child_process';
import { existsSync, readdirSync, readFileSync } from 'node:fs';
import { join } from 'node:path';
import { gzipSync } from 'node:zlib';
import { afterAll, describe, expect, it } from 'vitest';
import { Folders } from '../support/bad-input.ts';
import { PROGRAMS } from '../support/cli.ts';
import { fleetLog, fleetSite } from '../support/fleet.ts';
import { until } from '../support/until.ts';

const folders = new Folders();
afterAll(() => folders.remove());

const packed = gzipSync(fleetLog(3));
const LOG = fleetLog(1);

describe('a folder of sites', () => {
  const files = {
    'sites/good/site.yaml': fleetSite('good'),
    'sites/good/log.csv': LOG,
    'sites/no-site-file/log.csv': LOG,
    'sites/twin-a/site.yaml': fleetSite('mill-lane'),
    'sites/twin-a/log.csv': LOG,
    'sites/twin-b/site.yaml': fleetSite('mill-lane'),
    'sites/twin-b/log.csv': LOG,
    'sites/no-history/site.yaml': fleetSite('no-history'),
    'sites/cut/site.yaml': fleetSite('cut'),
    'sites/cut/log.csv.gz': packed.subarray(0, packed.length / 2),
    'sites/mistyped/site.yaml': fleetSite('mistyped').replace('horizon', 'horizn'),
    'sites/mistyped/log.csv': LOG,
    'sites/short/site.yaml': fleetSite('short'),
    'sites/short/log.csv': LOG.split('\n').slice(0, 30).join('\n'),
    'sites/notes/readme.md': 'nothing of ours',
  };

  it('one bad site never stops the others', async () => {
    const folder = folders.make(files);
    const { code, out, err } = await folders.run('stillwell fit --fleet sites --out fits --json --kind linear', folder);
    expect(code).toBe(3);
    expect(err).toBe('stillwell: sites/notes holds no site.yaml and no history; passed over\n');
    const said = JSON.parse(out) as { failed: number; fitted: number; sites: { site: string; problem?: string }[] };
    expect({ failed: said.failed, fitted: said.fitted }).toEqual({ failed: 7, fitted: 1 });
    const problems = Object.fromEntries(said.sites.map(({ site, problem }, k) => [`${k} ${site}`, problem]));
    expect(problems).toEqual({
      '0 cut': expect.stringMatching(/^sites\/cut\/log\.csv\.gz: expected a whole gzip file, got a damaged one/),
      '1 good': undefined,
      '2 sites/mistyped/site.yaml': expect.stringMatching(
        /^sites\/mistyped\/site\.yaml:4:1: horizn is not a known key; did you mean "horizon"\?/,
      ),
      '3 no-history': expect.stringMatching(
        /^sites\/no-history: expected history files in this folder .* got none; check the path/,
      ),
      '4 sites/no-site-file/site.yaml': expect.stringMatching(/expected a site file, got no such file/),
      '5 short': expect.stringMatching(/^The history holds 29 ticks.*Give a longer history/),
      '6 mill-lane': expect.stringMatching(/twin-a.*expected a site name of its own.*twin-b\/site\.yaml as well/),
      '7 mill-lane': expect.stringMatching(/twin-b.*expected a site name of its own.*twin-a\/site\.yaml as well/),
    });
    expect(readdirSync(join(folder, 'fits')).sort()).toEqual(['fleet.html', 'fleet.json', 'good']);
    expect(readFileSync(join(folder, 'fits/fleet.json'), 'utf8')).toBe(out);
    const page = readFileSync(join(folder, 'fits/fleet.html'), 'utf8');
    for (const words of ['href="good/report.html"', 'could not be fitted', 'horizn is not a known key', 'Advisory'])
      expect(page).toContain(words);
    expect(page).not.toMatch(/NaN|undefined|Infinity/);
  }, 60_000);
});

describe('a fleet file', () => {
  it('lists sites by patterns; one of them with what it wants otherwise', async () => {
    const folder = folders.make({
      'fleet.yaml': `sites:
  - {site: a.yaml, history: logs/a*.csv, until: 2024-01-10, kind: linear}
  - {site: b.yaml, history: [logs/none*.csv], kind: linear}
  - {site: c.yaml, history: logs, kind: linear}
  - {site: d.yaml, history: logs/a1.csv, from: yesterday}
`,
      'a.yaml': fleetSite('a'),
      'b.yaml': fleetSite('b'),
      'c.yaml': fleetSite('c'),
      'd.yaml': fleetSite('d'),
      'logs/a1.csv': LOG,
    });
    const { code, out } = await folders.run('stillwell fit --fleet fleet.yaml --out fits --json', folder);
    expect(code).toBe(3);
    const { sites } = JSON.parse(out) as { sites: { site: string; ticks?: number; problem?: string }[] };
    expect(sites.map(({ site, ticks, problem }) => [site, ticks ?? problem])).toEqual([
      ['a', 9 * 24],
      [
        'b',
        expect.stringMatching(
          /fleet\.yaml:3: history: logs\/none\*\.csv: expected history files that match this pattern, got none/,
        ),
      ],
      ['c', 260],
      ['d', expect.stringMatching(/--from: expected a time such as 2026-03-01, .* got "yesterday"/)],
    ]);
  }, 60_000);

  const refusals: Record<string, [string, RegExp[]]> = {
    'with a mistyped key': [
      'sites:\n  - {site: a.yaml, histry: a.csv}\n',
      [/fleet\.yaml:2:\d+: sites\[0\]\.histry is not a known key; did you mean "history"/],
    ],
    'that is a site file': [fleetSite('a'), [/fleet\.yaml:1:1: site is not a known key; did you mean "sites"/]],
  };
  it.each(Object.entries(refusals))('%s is refused at once', (_, [text, says]) =>
    folders.refuse({ line: 'stillwell fit --fleet fleet.yaml --out fits', files: { 'fleet.yaml': text }, says }),
  );
});

describe('options that do not go together', () => {
  it.each([
    ['stillwell fit --out x', /expected --site and --history, or --fleet, got none of them/],
    ['stillwell fit --site site.yaml --out x', /got --site alone, without --history/],
    ['stillwell fit --history a.csv --out x', /got --history alone, without --site/],
    ['stillwell fit --fleet f --site site.yaml --out x', /--site: expected no --fleet beside it/],
    ['stillwell fit --fleet f --override because --out x', /--override: .*write override into the entry of that site/],
    ['stillwell fit --site s --history h --threads 3 --out x', /--threads: expected 1 or 2 for a single site, got 3/],
    ['stillwell fit --site s --history h --fresh --out x', /--fresh: expected --fleet beside it/],
    [
      'stillwell fit --fleet nowhere --out x',
      /nowhere: expected a fleet file, or a folder .*, got no such file; check the path/,
    ],
    [
      'stillwell fit --fleet empty --out x',
      /empty: expected one sub-folder a site.*got none; make them, or give a fleet file/,
    ],
    ['stillwell fit --fleet f --threads 0 --out x', /--threads.*Expected a whole number, 1 to 256/],
  ])('%s', (line, words) => folders.refuse({ line, files: { empty: null }, says: [words] }));
});

describe('Ctrl-C', () => {
  it('ends with 130, leaves nothing half-written, and the same command goes on', async () => {
    const names = ['a', 'b', 'c', 'd', 'e', 'f'];
    const files = names.flatMap((name, k) => [
      [`sites/${name}/site.yaml`, fleetSite(name)],
      [`sites/${name}/log.csv`, fleetLog(k + 1)],
    ]);
    const folder = folders.make(Object.fromEntries(files));
    const args = ['fit', '--fleet', 'sites', '--out', 'fits', '--threads', '1', '--kind', 'linear'];
    const child = spawn(process.execPath, [PROGRAMS.stillwell, ...args], { cwd: folder });
    let err = '';
    child.stderr.on('data', (text) => {
      err += String(text);
    });
    const ended = new Promise((resolve) => child.once('exit', resolve));
    const isDone = (name: string): boolean => existsSync(join(folder, 'fits', name, 'fit-record.json'));
    await until('a first site done', () => names.some(isDone), 30_000);
    child.kill('SIGINT');
    expect(await ended).toBe(130);
    const done = Number(
      /stopped; (\d) of 6 sites are done and stay; the same command goes on with the rest/.exec(err)?.[1],
    );
    const left = readdirSync(join(folder, 'fits'), { recursive: true }) as string[];
    expect(left.filter((path) => path.endsWith('.part'))).toEqual([]);
    expect(left.filter((path) => path.endsWith('fit-record.json'))).toHaveLength(done);
    expect(left.some((path) => path.endsWith('fleet.json'))).toBe(false);
    const { code, out } = await folders.run(`stillwell ${args.join(' ')}`, folder);
    expect(code).toBe(0);
    expect(out).toContain('6 sites: ');
    expect(out).toContain(`${done} unchanged and not fitted again, none failed`);
  }, 60_000);
});
