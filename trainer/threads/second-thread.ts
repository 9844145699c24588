/**
 * A second thread beside the main one of a single fit, for what is independent and large. Answers come in the order asked. A
 * fleet's workers never start one: there every core has a site of its own.
 */
import { availableParallelism } from 'node:os';
import { isMainThread, Worker } from 'node:worker_threads';
import { compiledFile } from '../compiled-file.ts';
import { TrainError, type TrainErrorCode } from '../errors.ts';
import type { Answered, Asked, Problem, Requests } from './requests.ts';

/** Whether one gains anything here. */
export function hasSecondCore(): boolean {
  return isMainThread && availableParallelism() > 1;
}

/**
 * Numbers to go through below which a fit hardly gains by one. Measured, with eight signals: nothing is gained at 12,000, at
 * 35,000 the main thread computes an eighth less, for a quarter of a second of the other core that is spent on starting.
 */
const LEAST_NUMBERS = 50_000;

/** Whether a fit of so many numbers, ticks times channels and the lagged products it goes on from, gains by a second thread. */
export function paysSecondThread(numbers: number): boolean {
  return numbers >= LEAST_NUMBERS;
}

/** Chunks are outside the heap, which knows little of their size: a small young heap lets go of them sooner. */
const YOUNG_MB = 4;

interface Waiting {
  readonly resolve: (got: unknown) => void;
  readonly reject: (error: Error) => void;
}

/** Starts at once. */
export class SecondThread {
  readonly #worker: Worker;
  readonly #waiting = new Map<number, Waiting>();
  #asked = 0;
  #death: Error | null = null;

  /** Of another file, for tests of threads that die. */
  constructor(file: URL = compiledFile('threads/worker.js')) {
    this.#worker = new Worker(file, { resourceLimits: { maxYoungGenerationSizeMb: YOUNG_MB } });
    this.#worker.on('message', (answered: Answered) => this.#settle(answered));
    this.#worker.on('error', (error: Error & { code?: string }) => this.#die(deathOf(error)));
    this.#worker.on('exit', (code) => this.#die(deathOf(new Error(`exit code ${code}`))));
  }

  /**
   * Asks; the answer is waited for or not, its error never ends the program by itself. What is given travels as a copy: to
   * hand memory over would be quicker, but once any has left a thread, the engine checks every access to every array there,
   * and all filters and products after it take a tenth longer.
   *
   * throws TrainError as the work itself; 'fit' where the thread died
   */
  ask<What extends keyof Requests>(what: What, given: Requests[What]['given']): Promise<Requests[What]['got']> {
    const promise = new Promise<unknown>((resolve, reject) => {
      if (this.#death !== null) return reject(this.#death);
      const id = this.#asked++;
      this.#waiting.set(id, { resolve, reject });
      this.#worker.postMessage({ id, what, given } satisfies Asked);
    });
    promise.catch(() => {});
    return promise as Promise<Requests[What]['got']>;
  }

  /** Ends it, whatever it is at. */
  async end(): Promise<void> {
    this.#death ??= new Error('The second thread was ended.');
    await this.#worker.terminate();
  }

  #settle(answered: Answered): void {
    const waiting = this.#waiting.get(answered.id);
    this.#waiting.delete(answered.id);
    if ('problem' in answered) waiting?.reject(errorOf(answered.problem));
    else waiting?.resolve(answered.got);
  }

  #die(error: Error): void {
    this.#death ??= error;
    for (const { reject } of this.#waiting.values()) reject(this.#death);
    this.#waiting.clear();
  }
}

function errorOf({ name, message, stack, code, details }: Problem): Error {
  if (code !== null) return new TrainError(code as TrainErrorCode, message, { details: { ...details } });
  return Object.assign(new Error(message), { name, ...(stack === undefined ? {} : { stack }) });
}

function deathOf(error: Error & { code?: string }): TrainError {
  const why = error.code === 'ERR_WORKER_OUT_OF_MEMORY' ? 'it ran out of memory' : error.message;
  return new TrainError(
    'fit',
    `the second thread of this fit ended early (${why}); try again with more memory free, or with a longer tick`,
    { cause: error },
  );
}
