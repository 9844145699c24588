/**
 * The thread that watches the gateway's loop. It is handed over as text (watchdog.ts), so that the one-file program needs no
 * second file and the thread loads nothing of the gateway: all it uses stands within the function.
 */

/** What the thread is given. */
export interface WatchOrders {
  /** One number, raised by the loop whenever it comes round. */
  readonly beats: SharedArrayBuffer;
  /** Where the cause is written. */
  readonly file: string;
  readonly pid: number;
  /** The loop is looked at so often, and taken for hung when it did not come round for so many looks in a row. */
  readonly everyMs: number;
  readonly looks: number;
  /** So long the debugger may take to answer. */
  readonly answerMs: number;
}

/** One line of a call stack, innermost first. */
export interface StackLine {
  readonly function: string;
  readonly at: string;
}

/** What is written about a loop that hung. */
export interface HangRecord {
  readonly at: string;
  readonly silent_s: number;
  /** Where the loop was; empty where it was not in JavaScript. */
  readonly stack: readonly StackLine[];
  /** State of the main thread by proc(5): R computes, D waits for a disk. */
  readonly thread_state: string;
}

/**
 * Looks, and when the loop does not come round: asks the debugger where it is, writes that down, ends the process.
 *
 * Looks are counted and not seconds, so that a process that was stopped or slept as a whole is not blamed for it.
 */
export function watchLoop(): void {
  const { workerData } = process.getBuiltinModule('node:worker_threads');
  const { readFileSync, writeFileSync, renameSync } = process.getBuiltinModule('node:fs');
  const { beats, file, pid, everyMs, looks, answerMs } = workerData as WatchOrders;
  const count = new Int32Array(beats);
  let [seen, silent] = [-1, 0];

  const threadState = (): string => {
    try {
      const stat = readFileSync(`/proc/${pid}/task/${pid}/stat`, 'utf8');
      return stat.slice(stat.lastIndexOf(')') + 2, stat.lastIndexOf(')') + 3);
    } catch {
      return '';
    }
  };
  const end = (stack: StackLine[]): void => {
    const record: HangRecord = {
      at: new Date().toISOString(),
      silent_s: (silent * everyMs) / 1000,
      stack,
      thread_state: threadState(),
    };
    try {
      writeFileSync(`${file}.part`, `${JSON.stringify(record, null, 2)}\n`);
      renameSync(`${file}.part`, file);
    } catch {
      // A disk that takes nothing may be why it hangs: the process must end all the same.
    }
    process.kill(pid, 'SIGKILL');
  };
  const examine = (): void => {
    // Not before it is needed: memory is dear here.
    const session = new (process.getBuiltinModule('node:inspector').Session)();
    session.connectToMainThread();
    const scripts = new Map<string, string>();
    session.on('Debugger.scriptParsed', ({ params }) => void scripts.set(params.scriptId, params.url));
    session.on('Debugger.paused', ({ params }) => {
      const line = ({ functionName, location }: (typeof params.callFrames)[number]): StackLine => {
        const url = scripts.get(location.scriptId) ?? '';
        const place = `${location.lineNumber + 1}:${(location.columnNumber ?? 0) + 1}`;
        return { function: functionName || '(anonymous)', at: `${url}:${place}` };
      };
      end(params.callFrames.slice(0, 40).map(line));
    });
    session.post('Debugger.enable');
    session.post('Debugger.pause');
    // In a call of the system, or of a library's own code, nothing answers.
    setTimeout(() => end([]), answerMs);
  };
  const timer = setInterval(() => {
    const now = Atomics.load(count, 0);
    silent = now === seen ? silent + 1 : 0;
    seen = now;
    if (silent < looks) return;
    clearInterval(timer);
    examine();
  }, everyMs);
}
