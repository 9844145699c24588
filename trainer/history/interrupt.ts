/**
 * The one place that listens to a person who wants to stop (Ctrl-C) or a system that must: the work under way comes to a
 * place it can go on from, then ends. Asked again, it ends at once and says that the place was not kept; but what comes within
 * two seconds of the first is the same wish: a key pressed twice, or a signal that both terminal and `npx` hand on.
 */

/** Tells whether somebody wants to stop. */
export interface Interrupt {
  readonly isAsked: boolean;
}

/** What listens while there is work under way. */
export interface SignalWatch extends Interrupt {
  /** The place is kept, and the program on its way out: whoever asks again loses nothing. */
  kept(): void;
  /** Gives the signals their usual meaning back. */
  end(): void;
}

/** The process, as far as it is needed here. */
export interface SignalPort {
  on(signal: string, listener: () => void): unknown;
  off(signal: string, listener: () => void): unknown;
  nowMs(): number;
  /** Writes a line for the person. */
  say(sentence: string): void;
  /** Ends the program; may return in tests. */
  exit(code: number): void;
}

/** Exit code of a command that was interrupted: 128 and the number of SIGINT, as shells have it. */
export const INTERRUPTED_CODE = 130;

/** Work that was stopped on request; the command line prints the message alone and exits with 130. */
export class Interrupted extends Error {
  constructor() {
    super('Interrupted; the same command goes on from here.');
    this.name = 'Interrupted';
  }
}

const SIGNALS = ['SIGINT', 'SIGTERM'] as const;
/** Our own choice: longer than a double press, shorter than a person waits before insisting. */
const SAME_WISH_MS = 2000;
const NOT_KEPT =
  'stillwell: Ended before the place could be kept; the same command goes on from the last place kept on the way, and begins anew where there is none.';

const PROCESS: SignalPort = {
  on: (signal, listener) => process.on(signal, listener),
  off: (signal, listener) => process.off(signal, listener),
  nowMs: () => performance.now(),
  say: (sentence) => void process.stderr.write(`${process.stderr.isTTY ? '\r\x1b[K' : ''}${sentence}\n`),
  exit: (code) => process.exit(code),
};

/** Listens until `end` is called. */
export function watchSignals(port: SignalPort = PROCESS): SignalWatch {
  let askedMs: number | null = null;
  let isKept = false;
  const onSignal = (): void => {
    askedMs ??= port.nowMs();
    if (port.nowMs() - askedMs < SAME_WISH_MS) return;
    if (!isKept) port.say(NOT_KEPT);
    port.exit(INTERRUPTED_CODE);
  };
  for (const signal of SIGNALS) port.on(signal, onSignal);
  return {
    get isAsked() {
      return askedMs !== null;
    },
    kept() {
      isKept = true;
    },
    end() {
      for (const signal of SIGNALS) port.off(signal, onSignal);
    },
  };
}
