/**
 * The built commands as people run them: a process of its own in a folder of its own, its exit code and what it printed.
 * `npm test` builds before it runs the tests.
 */
import { type ChildProcess, execFile, fork } from 'node:child_process';
import { createHash } from 'node:crypto';
import { readdirSync, readFileSync } from 'node:fs';
import { join } from 'node:path';
import { fileURLToPath } from 'node:url';
import { expect } from 'vitest';

/** What came of one run. */
export interface Ran {
  /** Exit code; null when it had to be killed. */
  readonly code: number | null;
  readonly out: string;
  readonly err: string;
}

/** The two commands, by name. */
export const PROGRAMS = {
  stillwell: fileURLToPath(new URL('../../trainer/stillwell.js', import.meta.url)),
  'stillwell-gateway': fileURLToPath(new URL('../../runtime/stillwell-gateway.js', import.meta.url)),
} as const;

const ENTRIES = {
  stillwell: fileURLToPath(new URL('../../trainer/dist/cli.js', import.meta.url)),
  'stillwell-gateway': fileURLToPath(new URL('../../runtime/dist/cli.js', import.meta.url)),
} as const;

/** Longer than any refusal may take, the wait for a silent broker included, on a busy machine. */
const PATIENCE_MS = 90_000;

/** Program and arguments of a line such as "stillwell show x.swb", parted by blanks; '' stands for an empty one. */
function wordsOf(line: string): { program: keyof typeof PROGRAMS; args: string[] } {
  const [program, ...args] = line.split(' ');
  return { program: program as keyof typeof PROGRAMS, args: args.map((word) => (word === "''" ? '' : word)) };
}

/** Runs one command line in `folder`, as a process of its own. */
export function run(line: string, folder: string): Promise<Ran> {
  const { program, args } = wordsOf(line);
  const options = { cwd: folder, timeout: PATIENCE_MS, killSignal: 'SIGKILL' } as const;
  return new Promise((resolve) => {
    execFile(process.execPath, [PROGRAMS[program], ...args], options, (error, out, err) => {
      const code = error === null ? 0 : typeof error.code === 'number' ? error.code : null;
      resolve({ code, out, err });
    });
  });
}

/** Runs many command lines one after another in one process, which is twenty times as quick; see command-child.mjs. */
export class Starter {
  #child: ChildProcess | null = null;
  #last: Promise<unknown> = Promise.resolve();
  #number = 0;

  /** As `run`, in turn. A command that hangs or brings the process down fails its own line alone. */
  run(line: string, folder: string): Promise<Ran> {
    const turn = this.#last.then(() => this.#start(line, folder));
    this.#last = turn.catch(() => {});
    return turn;
  }

  stop(): void {
    this.#child?.kill('SIGKILL');
    this.#child = null;
  }

  #start(line: string, folder: string): Promise<Ran> {
    const { program, args } = wordsOf(line);
    this.#child ??= fork(fileURLToPath(new URL('./command-child.mjs', import.meta.url)), { stdio: 'inherit' });
    const child = this.#child;
    return new Promise((resolve, reject) => {
      const fail = (why: string): void => {
        settle();
        this.stop();
        reject(new Error(`${line}: ${why}`));
      };
      const onExit = (code: number | null): void => fail(`ended the process with ${code}`);
      const timer = setTimeout(() => fail(`no end within ${PATIENCE_MS} ms`), PATIENCE_MS);
      const settle = (): void => {
        clearTimeout(timer);
        child.removeAllListeners('message').off('exit', onExit);
      };
      child.once('exit', onExit);
      child.once('message', (ran: Ran) => {
        settle();
        resolve(ran);
      });
      child.send({ number: this.#number++, program: ENTRIES[program], args, folder });
    });
  }
}

/** Every file below a folder with a hash of its bytes, every folder with "folder". */
export function contentsOf(folder: string): Readonly<Record<string, string>> {
  const entries = readdirSync(folder, { recursive: true, withFileTypes: true });
  return Object.fromEntries(
    entries
      .map((entry) => {
        const path = join(entry.parentPath, entry.name);
        const what = entry.isDirectory()
          ? 'folder'
          : createHash('sha256').update(readFileSync(path)).digest('hex').slice(0, 16);
        return [path, what] as const;
      })
      .sort(([a], [b]) => (a < b ? -1 : 1)),
  );
}

/**
 * Runs a command that must refuse: exit code 2, one line on standard error that starts with the command's name and says
 * what `words` ask for, no stack, nothing on standard output, nothing written in `folder`.
 */
export async function expectRefusal(
  line: string,
  folder: string,
  words: readonly RegExp[],
  start: (line: string, folder: string) => Promise<Ran> = run,
): Promise<void> {
  const before = contentsOf(folder);
  const ran = await start(line, folder);
  const said = `${line}\n${ran.err}`;
  expect(ran.err, said).not.toMatch(/\n\s+at /);
  expect(ran.err.trimEnd().split('\n'), said).toHaveLength(1);
  expect(ran.err.startsWith(`${line.split(' ')[0]}: `), said).toBe(true);
  for (const word of words) expect(ran.err, line).toMatch(word);
  expect(ran.code, said).toBe(2);
  expect(ran.out, line).toBe('');
  expect(contentsOf(folder), `${line}: the folder afterwards`).toEqual(before);
}

/** A folder of files for one case. */
export interface Case {
  /** The command line. */
  readonly line: string;
  /** Names and contents; null: a folder. */
  readonly files?: Readonly<Record<string, string | Uint8Array | null>>;
  /** Where it is wrong, what is expected, what to do. */
  readonly says: readonly RegExp[];
}
