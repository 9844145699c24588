/** Every command line shown in the READMEs names a command and options that exist. */
import { execFileSync } from 'node:child_process';
import { existsSync, readFileSync } from 'node:fs';
import { join } from 'node:path';
import { fileURLToPath } from 'node:url';
import { describe, expect, test } from 'vitest';

const root = fileURLToPath(new URL('../..', import.meta.url));
const documents = [
  'README.md',
  'DEVELOPERS.md',
  'protocol/README.md',
  'runtime/README.md',
  'runtime/install.md',
  'trainer/README.md',
];
const programs: Readonly<Record<string, string>> = {
  stillwell: join(root, 'trainer/dist/cli.js'),
  'stillwell-gateway': join(root, 'runtime/dist/cli.js'),
};

interface Shown {
  readonly document: string;
  readonly program: string;
  readonly words: readonly string[];
}

/** Command lines of our two programs inside shell blocks, continuation lines joined, comments cut. */
function shownIn(document: string): Shown[] {
  const text = readFileSync(join(root, document), 'utf8');
  return [...text.matchAll(/```sh\n([\s\S]*?)```/g)].flatMap((block) =>
    (block[1] as string)
      .replaceAll('\\\n', ' ')
      .split('\n')
      .flatMap((line) => {
        const match = /^(?:npx )?(stillwell(?:-gateway)?) +(.*)$/.exec(line.replace(/\s#.*$/, '').trim());
        return match ? [{ document, program: match[1] as string, words: (match[2] as string).split(/\s+/) }] : [];
      }),
  );
}

const helps = new Map<string, string>();

function helpOf(program: string, path: readonly string[]): string {
  const key = [program, ...path].join(' ');
  const known = helps.get(key);
  if (known !== undefined) return known;
  const help = execFileSync(process.execPath, [programs[program] as string, ...path, '--help'], { encoding: 'utf8' });
  helps.set(key, help);
  return help;
}

/** The words before the first option that `--help` of the command so far lists as commands. */
function commandPath({ program, words }: Shown): string[] {
  const path: string[] = [];
  for (const word of words) {
    if (word.startsWith('-') || !new RegExp(`^  ${word}\\b`, 'm').test(helpOf(program, path))) break;
    path.push(word);
    if (!helpOf(program, path).includes('Commands:')) break;
  }
  return path;
}

const shown = documents.flatMap(shownIn);

describe.skipIf(!existsSync(programs.stillwell as string))('command lines in the documents', () => {
  test('there are some of both programs', () => {
    expect(shown.filter((one) => one.program === 'stillwell').length).toBeGreaterThan(8);
    expect(shown.filter((one) => one.program === 'stillwell-gateway').length).toBeGreaterThan(3);
  });

  test.each(shown)('$document: $program $words', (one) => {
    const path = commandPath(one);
    expect(path, 'a command of that name').not.toEqual([]);
    const help = helpOf(one.program, path);
    for (const option of one.words.filter((word) => word.startsWith('--'))) {
      expect(help, `${one.program} ${path.join(' ')} knows ${option}`).toMatch(new RegExp(`${option}\\b`));
    }
  });
});
