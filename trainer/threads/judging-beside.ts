/**
 * Judging on a second thread of a fit: of a long one begun when that of the factors has ended, so that memory holds one of
 * them; of a short one on the same thread. What is settled of the first kind while others are tried, the checks of the chosen
 * one while it is replayed, and what a refit compares it with while its report is made. The same work, so the same results.
 */
import type { Bundle } from '@stillwell/protocol';
import type { Model } from '@stillwell/runtime/filter';
import type { Series } from '../history/series.ts';
import type { HindcastSpan } from '../judge/hindcast.ts';
import type { Settled } from '../judge/settle.ts';
import { settleStuck } from '../judge/stuck-guard.ts';
import { withCalibration } from '../kinds/candidate.ts';
import type { Calibration } from '../quantise/float-model.ts';
import type { TickSpan } from '../span.ts';
import type { Cast, Checks } from './requests.ts';
import { SecondThread } from './second-thread.ts';

/** Of one fit; first of all it is begun. */
export class JudgingBeside {
  readonly #before: Promise<unknown> | SecondThread;
  readonly #compares: boolean;
  #thread: SecondThread | null = null;

  /**
   * After the last answer of the thread before it, or on one that goes on. With `compares` the thread stays up after the
   * checks, for `cast`.
   */
  constructor(before: Promise<unknown> | SecondThread, compares = false) {
    this.#before = before;
    this.#compares = compares;
  }

  /** Starts the thread, or has it load what follows needs. */
  async begin(): Promise<void> {
    if (!(this.#before instanceof SecondThread)) await this.#before;
    this.#thread = this.#before instanceof SecondThread ? this.#before : new SecondThread();
    this.#thread.ask('judging', null);
  }

  /**
   * As `settle` on the main thread. What is got ends it: crossings, the larger part, may still be learned beside while the main
   * thread judges the guard against sensors that hang, which goes by neither.
   */
  settle(model: Model, series: Series, span: TickSpan, wanted: Settled): () => Promise<Calibration> {
    const thread = this.#begun();
    const bounds = thread.ask('bounds', { model, series: shared(series), span, wanted });
    const crossings = thread.ask('crossings', null);
    return async () => {
      const { guarded, standing } = await bounds;
      const bounded = withCalibration(model, guarded);
      const stuck = settleStuck(bounded, series, span, wanted.stuck, standing ?? undefined);
      return { ...guarded, ...(await crossings), ...(stuck === undefined ? {} : { stuck }) };
    };
  }

  /** As `auditRounding` of a long judged part, and `reliance`. */
  check(bundle: Bundle, float: Model, series: Series, judged: TickSpan): Promise<Checks> {
    const checks = this.#begun().ask('check', { bundle, float, series: shared(series), judged });
    if (!this.#compares) this.#begun().ask('end', null);
    return checks;
  }

  /** As `hindcast`. */
  cast(model: Model, series: Series, span: HindcastSpan, units: readonly string[]): Promise<Cast> {
    return this.#begun().ask('cast', { model, series: shared(series), span, units });
  }

  /** Ends the thread, whatever it is at; not one that was there before. */
  async end(): Promise<void> {
    if (this.#thread !== this.#before) await this.#thread?.end();
  }

  #begun(): SecondThread {
    if (this.#thread === null) throw new Error('Judging beside was asked for before it was begun.');
    return this.#thread;
  }
}

/** Its values copied once, to where both threads read them, in place of twice on their way. */
function shared(series: Series): Series {
  const values = series.values.map((y) => {
    const out = new Float64Array(new SharedArrayBuffer(y.byteLength));
    out.set(y);
    return out;
  });
  return { ...series, values };
}
