/** A program run to its end: how long, how much processor time, and the most memory it ever held, as the system counts them. */
import { spawn } from 'node:child_process';
import { readFileSync } from 'node:fs';
import { fileURLToPath } from 'node:url';

/** What a run took. */
export interface Ran {
  readonly seconds: number;
  readonly cpuSeconds: number;
  readonly peakMb: number;
  /** Seconds since the start and megabytes held then, every few milliseconds. */
  readonly held: readonly (readonly [number, number])[];
  readonly stdout: string;
}

/** A run that failed, in a line for people. */
export class FailedRun extends Error {}

/** As npm links it for whoever installs the package. */
export const STILLWELL = fileURLToPath(new URL('../../../node_modules/.bin/stillwell', import.meta.url));

const SCRIPTS = fileURLToPath(new URL('../peers/', import.meta.url));
/**
 * The kernel keeps the high-water mark, so only what is gained since the last look could be missed; looking every 5 ms cost what was
 * watched 5 % of its time.
 */
const LOOK_MS = 25;
/** Of the clock, for one that hangs. */
const MOST_SECONDS = 1800;
const KEPT_ERROR = 400;
/** USER_HZ, which Linux fixes for what it shows in /proc. */
const CLOCK_TICKS = 100;

/** Words that start a peer of ours in NumPy or Octave. */
export function peerCommand(script: string, words: readonly string[]): readonly string[] {
  const start = script.endsWith('.py') ? ['/usr/bin/python3', '-B'] : ['octave-cli', '--norc', '--quiet'];
  return [...start, `${SCRIPTS}${script}`, ...words];
}

/**
 * Runs a program.
 *
 * throws  FailedRun where it cannot be started, ends badly, or is not done after half an hour
 */
export function measure(command: readonly string[]): Promise<Ran> {
  return new Promise((resolve, reject) => {
    const started = performance.now();
    const [program, ...words] = command;
    const child = spawn(program!, words, { stdio: ['ignore', 'pipe', 'pipe'] });
    let seen = { peakMb: 0, cpuSeconds: 0 };
    const held: (readonly [number, number])[] = [];
    const look = setInterval(() => {
      const now = usage(child.pid);
      if (now === null) return;
      seen = { peakMb: now.peakMb, cpuSeconds: now.cpuSeconds };
      held.push([(performance.now() - started) / 1000, now.heldMb]);
    }, LOOK_MS);
    const kill = (): void => void child.kill('SIGKILL');
    const limit = setTimeout(kill, MOST_SECONDS * 1000);
    process.once('exit', kill);
    const out: Buffer[] = [];
    let error = '';
    child.stdout.on('data', (bytes: Buffer) => out.push(bytes));
    child.stderr.on('data', (bytes: Buffer) => {
      error = (error + bytes.toString('utf8')).slice(-4 * KEPT_ERROR);
    });
    const end = (): void => {
      clearInterval(look);
      clearTimeout(limit);
      process.off('exit', kill);
    };
    child.on('error', (problem) => {
      end();
      reject(new FailedRun(`${program}: ${problem.message}`));
    });
    child.on('close', (code, signal) => {
      end();
      const seconds = (performance.now() - started) / 1000;
      if (code === 0) resolve({ seconds, ...seen, held, stdout: Buffer.concat(out).toString('utf8') });
      else reject(new FailedRun(`${command.join(' ')}: ended with ${code ?? signal}: ${lastOf(error)}`));
    });
  });
}

function lastOf(error: string): string {
  return error.trim().replaceAll(/\s+/g, ' ').slice(-KEPT_ERROR);
}

/** VmHWM and VmRSS of status, utime and stime of stat, proc(5); null where the process is gone. */
function usage(pid: number | undefined): { peakMb: number; heldMb: number; cpuSeconds: number } | null {
  try {
    const status = readFileSync(`/proc/${pid}/status`, 'utf8');
    const megabytes = (field: string): number =>
      (Number(new RegExp(`^${field}:\\s+(\\d+) kB`, 'm').exec(status)?.[1]) * 1024) / 1e6;
    const stat = readFileSync(`/proc/${pid}/stat`, 'utf8');
    const fields = stat.slice(stat.lastIndexOf(')') + 2).split(' ');
    const peakMb = megabytes('VmHWM');
    if (Number.isNaN(peakMb)) return null;
    const cpuSeconds = (Number(fields[11]) + Number(fields[12])) / CLOCK_TICKS;
    return { peakMb, heldMb: megabytes('VmRSS'), cpuSeconds };
  } catch {
    return null;
  }
}

/** The middle one. */
export function median(values: readonly number[]): number {
  const sorted = [...values].sort((a, b) => a - b);
  const half = sorted.length >> 1;
  return sorted.length % 2 === 1 ? sorted[half]! : (sorted[half - 1]! + sorted[half]!) / 2;
}

/** Slope of log y on log x by least squares: how y grows with x, 1 where it is in proportion. */
export function growthExponent(points: readonly (readonly [number, number])[]): number {
  const logs = points.map(([x, y]) => [Math.log(x), Math.log(y)] as const);
  const middle = (k: 0 | 1): number => logs.reduce((sum, log) => sum + log[k], 0) / logs.length;
  const [x, y] = [middle(0), middle(1)];
  const across = logs.reduce((sum, log) => sum + (log[0] - x) * (log[1] - y), 0);
  return across / logs.reduce((sum, log) => sum + (log[0] - x) ** 2, 0);
}
