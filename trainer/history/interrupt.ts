/**
 * The one place that listens to a person who wants to stop (Ctrl-C) or a system that must: the work under way comes to a
 * place it can go on from, then ends. Asked twice, it ends at once; what was last saved then stands.
 */

/** Tells whether somebody wants to stop. */
export interface Interrupt {
  readonly isAsked: boolean;
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

/** Listens until `end` is called, which gives the signals their usual meaning back. */
export function watchSignals(): Interrupt & { end(): void } {
  let isAsked = false;
  const onSignal = (): void => {
    if (isAsked) process.exit(INTERRUPTED_CODE);
    isAsked = true;
  };
  for (const signal of SIGNALS) process.on(signal, onSignal);
  return {
    get isAsked() {
      return isAsked;
    },
    end() {
      for (const signal of SIGNALS) process.off(signal, onSignal);
    },
  };
}
