/**
 * The demo's child processes: the two real command lines, started as a person would start them. Every child is known
 * here and is ended with the demo, however the demo ends.
 */
import { type ChildProcess, spawn } from 'node:child_process';
import { createWriteStream, readFileSync } from 'node:fs';
import { createRequire } from 'node:module';
import { dirname, join } from 'node:path';

/** Which of the project's two commands. */
export type CommandName = 'stillwell' | 'stillwell-gateway';

/** One running child. */
export interface Running {
  readonly name: string;
  readonly pid: number;
  /** Where its output goes. */
  readonly logFile: string;
  readonly hasEnded: () => boolean;
  /** Asks it to stop and waits; after `graceMs` it is killed. Resolves to its exit code, null when a signal ended it. */
  stop(graceMs?: number): Promise<number | null>;
  /** Ends it as a power cut would. */
  kill(): Promise<void>;
}

const SCRIPTS: Readonly<Record<CommandName, string>> = {
  stillwell: '@stillwell/trainer',
  'stillwell-gateway': '@stillwell/runtime',
};

/** Path of a command's built entry. */
export function scriptOf(command: CommandName): string {
  return join(dirname(createRequire(import.meta.url).resolve(SCRIPTS[command])), 'cli.js');
}

/** Children of one demo run; logs go to `logFolder`, which must exist. */
export class Processes {
  private readonly logFolder: string;
  private readonly children = new Map<ChildProcess, { name: string; expected: boolean }>();
  /** Called when a child ends that nobody asked to end. */
  onUnexpectedEnd: (name: string, detail: string) => void = () => {};

  constructor(logFolder: string) {
    this.logFolder = logFolder;
    // Last resort: a demo that dies by an error or a second Ctrl-C takes its children along.
    process.once('exit', () => {
      for (const child of this.children.keys()) child.kill('SIGKILL');
    });
  }

  /** Starts a command that goes on running. */
  start(name: string, command: CommandName, args: readonly string[], nodeArgs: readonly string[] = []): Running {
    const logFile = join(this.logFolder, `${name}.log`);
    const child = spawn(process.execPath, [...nodeArgs, scriptOf(command), ...args], {
      stdio: ['ignore', 'pipe', 'pipe'],
    });
    const log = createWriteStream(logFile, { flags: 'a' });
    child.stdout?.pipe(log, { end: false });
    child.stderr?.pipe(log, { end: false });
    const entry = { name, expected: false };
    this.children.set(child, entry);
    let ended = false;
    let code: number | null = null;
    const end = new Promise<void>((resolve) => {
      const done = (detail: string): void => {
        if (ended) return;
        ended = true;
        this.children.delete(child);
        log.end(() => {
          if (!entry.expected) this.onUnexpectedEnd(name, `${detail}\n${tail(logFile)}`);
          resolve();
        });
      };
      child.once('error', (cause) => done(cause.message));
      child.once('close', (exitCode, signal) => {
        code = exitCode;
        done(signal === null ? `exit code ${exitCode}` : `signal ${signal}`);
      });
    });
    const stop = async (graceMs = 8000): Promise<number | null> => {
      entry.expected = true;
      child.kill('SIGTERM');
      const timer = setTimeout(() => child.kill('SIGKILL'), graceMs);
      await end;
      clearTimeout(timer);
      return code;
    };
    const kill = async (): Promise<void> => {
      entry.expected = true;
      child.kill('SIGKILL');
      await end;
    };
    return { name, pid: child.pid ?? -1, logFile, hasEnded: () => ended, stop, kill };
  }

  /** Runs a command to its end and gives its standard output; throws with the last lines it said when it fails. */
  run(command: CommandName, args: readonly string[]): Promise<string> {
    return new Promise((resolve, reject) => {
      const child = spawn(process.execPath, [scriptOf(command), ...args], { stdio: ['ignore', 'pipe', 'pipe'] });
      this.children.set(child, { name: command, expected: true });
      let out = '';
      let said = '';
      child.stdout.on('data', (piece: Buffer) => {
        out += piece.toString();
      });
      child.stderr.on('data', (piece: Buffer) => {
        said += piece.toString();
      });
      child.once('error', reject);
      child.once('close', (code, signal) => {
        this.children.delete(child);
        if (code === 0) resolve(out);
        else
          reject(
            new Error(
              `${command} ${args.join(' ')}\n  ended with ${signal ?? `code ${code}`}: ${said.trim() || out.trim()}`,
            ),
          );
      });
    });
  }

  /** Stops every child and waits for all of them. */
  async stopAll(graceMs = 8000): Promise<void> {
    const all = [...this.children.entries()].map(
      ([child, entry]) =>
        new Promise<void>((resolve) => {
          entry.expected = true;
          child.once('close', () => resolve());
          if (child.exitCode !== null || child.signalCode !== null) resolve();
          child.kill('SIGTERM');
          setTimeout(() => child.kill('SIGKILL'), graceMs).unref();
        }),
    );
    await Promise.all(all);
  }
}

/** Runs jobs with at most `width` under way; the first failure stops the taking of new ones and is thrown. */
export async function inParallel<T>(jobs: readonly (() => Promise<T>)[], width: number): Promise<T[]> {
  const results: T[] = new Array(jobs.length);
  let next = 0;
  const worker = async (): Promise<void> => {
    while (next < jobs.length) {
      const index = next++;
      try {
        results[index] = await jobs[index]();
      } catch (error) {
        next = jobs.length;
        throw error;
      }
    }
  };
  await Promise.all(Array.from({ length: Math.min(width, jobs.length) }, worker));
  return results;
}

/** Resident memory of a process in MiB as Linux tells it, null elsewhere or when it is gone. */
export function residentMiB(pid: number): number | null {
  try {
    const line = /^VmRSS:\s+(\d+) kB$/m.exec(readFileSync(`/proc/${pid}/status`, 'utf8'));
    return line === null ? null : Number(line[1]) / 1024;
  } catch {
    return null;
  }
}

function tail(file: string): string {
  try {
    return readFileSync(file, 'utf8').trim().split('\n').slice(-8).join('\n');
  } catch {
    return '';
  }
}
