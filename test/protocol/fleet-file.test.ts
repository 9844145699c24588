import { describe, expect, it } from 'vitest';
import { parseFleetFile } from '../../protocol/index.ts';

const parse = (text: string) => parseFleetFile(text, 'fleet.yaml');

describe('a fleet file', () => {
  it('lists sites with history and what each wants otherwise', () => {
    const entries = parse(`sites:
  - site: north/site.yaml
    history: north/*.csv
  - site: south.yaml
    history: [a.csv, b.csv.gz]
    use_all: true
    learn_share: 0.5
    half_life: 30d
    kind: dense
    override: new pump
`);
    expect(entries).toEqual([
      { site: 'north/site.yaml', history: ['north/*.csv'], options: {}, line: 2 },
      {
        site: 'south.yaml',
        history: ['a.csv', 'b.csv.gz'],
        options: { useAll: true, learnShare: 0.5, halfLife: 30 * 86_400_000, kind: 'dense', override: 'new pump' },
        line: 4,
      },
    ]);
  });
});

describe('refused with line and field', () => {
  const entry = (more: string): string => `sites:\n  - site: a.yaml\n    history: a.csv\n    ${more}\n`;
  it.each([
    ['', /^fleet\.yaml:1:1: expected a fleet file with the keys sites, got an empty file/],
    ['sites: []', /^fleet\.yaml:1:8: sites: expected at least 1 entries, got \[\]/],
    ['site: a.yaml', /^fleet\.yaml:1:1: site is not a known key; did you mean "sites"\?/],
    ['sites:\n  - site: a.yaml\n', /^fleet\.yaml:2:5: sites\[0\]\.history: expected a path or pattern/],
    ['sites:\n  - site: a.yaml\n    history: 5\n', /^fleet\.yaml:3:14: sites\[0\]\.history: expected .*, got 5/],
    [
      'sites:\n  - site: 7\n    history: a.csv\n',
      /^fleet\.yaml:2:11: sites\[0\]\.site: expected the path of a site file, got 7/,
    ],
    [
      entry('learn_shar: 0.5'),
      /^fleet\.yaml:4:5: sites\[0\]\.learn_shar is not a known key; did you mean "learn_share"/,
    ],
    [entry('learn_share: 60'), /^fleet\.yaml:4:18: sites\[0\]\.learn_share: expected a share between 0 and 1, got 60/],
    [
      entry('kind: liner'),
      /^fleet\.yaml:4:11: sites\[0\]\.kind: expected one of auto.*did you mean "linear"\?\), got "liner"/,
    ],
    [entry('max_bytes: 10'), /^fleet\.yaml:4:16: .*a whole number from 2048 to 65536, got 10/],
    [entry('\tuse_all: yes'), /^fleet\.yaml:\d+:\d+: /],
    [entry('use_all: 1'), /^fleet\.yaml:4:14: sites\[0\]\.use_all: expected true or false, got 1/],
  ])('%j', (text, words) => {
    expect(() => parse(text)).toThrow(words);
  });
});
