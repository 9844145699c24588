/** Site files and command lines that are no good, through both commands. */
import { afterAll, describe, expect, it } from 'vitest';
import { csv, Folders, PICTURE, ROWS, SITE_FILE } from '../support/bad-input.ts';
import { type Case, expectRefusal } from '../support/cli.ts';

const folders = new Folders();
afterAll(() => folders.remove());

const fit = 'stillwell fit --site site.yaml --history x.csv --out out';
const survey = 'stillwell survey --site site.yaml --history x.csv';
const check = 'stillwell-gateway check --site site.yaml --trust none.pub --broker mqtt://127.0.0.1:1';
const edited = (from: string, to: string) => ({ 'site.yaml': SITE_FILE.replace(from, to) });

const siteFiles: Record<string, Case> = {
  'a missing file': {
    line: survey.replace('site.yaml', 'none.yaml'),
    says: [/none\.yaml: expected a site file, got no such file; make a first one with `stillwell site/],
  },
  'an empty file': { line: check, files: { 'site.yaml': '' }, says: [/site\.yaml: the file is empty/] },
  'a folder': { line: check, files: { 'site.yaml': null }, says: [/site\.yaml: expected a file, got a folder/] },
  'a picture': {
    line: fit,
    files: { 'site.yaml': PICTURE },
    says: [/site\.yaml: expected a site file as text in UTF-8, got other bytes; check that it is the right file/],
  },
  'a typo in a key': {
    line: fit,
    files: edited('horizon:', 'horizn:'),
    says: [/site\.yaml:5:1: horizn is not a known key; did you mean "horizon"\?/],
  },
  'a typo in a key of a signal': {
    line: check,
    files: edited('resolution:', 'resolutoin:'),
    says: [/site\.yaml:11:5: signals\[0\]\.resolutoin is not a known key; did you mean "resolution"\?/],
  },
  'a value of the wrong type': {
    line: survey,
    files: edited('tick: 1h', 'tick: [1]'),
    says: [/site\.yaml:4:7: tick: expected a duration .*such as "10s".* got \[1\]/],
  },
  'broken YAML': { line: fit, files: edited('signals:', 'signals: ]['), says: [/site\.yaml:6:10: not valid YAML/] },
  'a zone that does not exist': {
    line: check,
    files: edited('Europe/London', 'Europe/Lundon'),
    says: [/site\.yaml:3:12: time_zone: expected an IANA time zone.*did you mean "Europe\/London"/],
  },
  'a horizon longer than the history': {
    line: fit,
    files: edited('horizon: 24', 'horizon: 1000'),
    says: [/horizon of 1000 ticks is longer than the history of 960 ticks/, /[Ss]horten the horizon/],
  },
};

const lines: Record<string, Case> = {
  'an unknown command': { line: 'stillwell fti', says: [/unknown command 'fti' \(Did you mean fit\?\); add --help/] },
  'the same of the gateway': { line: 'stillwell-gateway rnu', says: [/'rnu' \(Did you mean run\?\); add --help/] },
  'an unknown option': {
    line: `${fit} --sead 3`,
    says: [/unknown option '--sead' \(Did you mean --seed\?\); add --help/],
  },
  'a missing option': {
    line: 'stillwell-gateway run --site site.yaml',
    says: [/required option '--broker <url>' not specified; add --help/],
  },
  'a bad number': {
    line: `${fit} --max-bytes 1`,
    says: [/--max-bytes <bytes>' argument '1' is invalid. Expected a whole number, 2048 to 65536; add --help/],
  },
  'a bad share': {
    line: `${fit} --learn-share 2`,
    says: [/--learn-share.*Expected a share between 0 and 1; add --help/],
  },
  'a bad time': {
    line: `${fit} --from yesterday`,
    says: [/--from: expected a time such as 2026-03-01.*got "yesterday"/],
  },
  'an end before the start': {
    line: `${fit} --from 2024-02-01 --until 2024-01-01`,
    says: [/--until: expected a time after --from \(2024-02-01\), got 2024-01-01; change one/],
  },
  'a zone that no time needs': {
    line: `${survey} --time-zone Europe/Lundon`,
    says: [/time zone: expected an IANA name.*got "Europe\/Lundon"; check the spelling/],
  },
  'an empty reason': {
    line: `${fit} --override ''`,
    says: [/--override <reason>'.*Expected the reason in words; add --help/],
  },
  'a wildcard in a topic level': {
    line: 'stillwell desk --data data --broker mqtt://127.0.0.1:1 --root +',
    says: [/--root <topic>' argument '\+' is invalid. Expected topic levels without wildcards/],
  },
};

describe('refused in one line, exit code 2, nothing written', () => {
  it.each(Object.entries({ ...siteFiles, ...lines }))(
    '%s',
    (_, one) =>
      folders.refuse(one, one.files?.['site.yaml'] === null ? {} : { 'site.yaml': SITE_FILE, 'x.csv': csv(ROWS) }),
    120_000,
  );
});

it('the process itself ends with that line and code', async () => {
  const folder = folders.make({ 'site.yaml': SITE_FILE.replace('horizon:', 'horizn:') });
  await expectRefusal(fit, folder, [/site\.yaml:5:1: horizn/]);
  await expectRefusal(check, folder, [/site\.yaml:5:1: horizn/]);
}, 120_000);

it('what is no refusal is told from one', async () => {
  const good = { 'site.yaml': SITE_FILE, 'x.csv': csv(ROWS) };
  await expect(folders.refuse({ line: survey, says: [] }, good)).rejects.toThrow();
  await expect(folders.refuse({ line: `${survey} --out new.json`, says: [] }, good)).rejects.toThrow();
  await expect(folders.refuse({ line: 'stillwell fti', says: [/fit anew/] }, good)).rejects.toThrow(/fit anew/);
}, 120_000);

it('the same command lines with nothing wrong in them', async () => {
  const folder = folders.make({ 'site.yaml': SITE_FILE, 'x.csv': csv(ROWS) });
  const line = `${survey} --time-zone Europe/London --out survey.json`;
  expect(await folders.run(line, folder)).toMatchObject({ code: 0, err: '' });
  expect(await folders.run('stillwell fit --help', folder)).toMatchObject({ code: 0, err: '' });
}, 120_000);
