/**
 * The plans of a site's inputs: the newest of each that could be read, until its end has passed. Nothing is kept on disk:
 * plans are retained messages, so the broker says them again after a restart.
 */
import { matchesFilter, type Plan, ProtocolError, parsePlan, type Site } from '@stillwell/protocol';
import type { Model } from '@stillwell/runtime/filter';
import { PlanRecord } from './plan-record.ts';
import { planAtTick } from './plan-ticks.ts';

/** What became of a plan message, for each input it is of. */
export interface PlanOutcome {
  readonly input: string;
  /** 'known': the same bytes with the same result as before; nothing to say. */
  readonly kind: 'taken' | 'withdrawn' | 'refused' | 'known';
  /** Cause to count and sentence to log, of a refusal. */
  readonly cause: string;
  readonly text: string;
}

/** A plan in force. */
export interface PlanInForce {
  readonly plan: Plan;
  /** When it was made or, where it does not say, came; NaN where even that is not known. */
  readonly madeAtMs: number;
}

interface Slot {
  inForce: PlanInForce | null;
  /** The last message and what became of it. */
  payload: Uint8Array;
  outcome: string;
  record: PlanRecord;
}

/** See the file head. */
export class PlanKeeper {
  readonly #site: Site;
  readonly #slots: readonly Slot[];
  /** (nu × H) in the inputs' units */
  #window: Float64Array;
  #taken = 0;
  readonly #refused = new Map<string, number>();

  constructor(site: Site) {
    this.#site = site;
    this.#slots = site.inputs.map(() => ({
      inForce: null,
      payload: new Uint8Array(0),
      outcome: '',
      record: new PlanRecord(site.horizon),
    }));
    this.#window = new Float64Array(site.inputs.length * site.horizon);
  }

  /** Topic filters to subscribe, each once. */
  get filters(): readonly string[] {
    return [...new Set(this.#site.inputs.flatMap(({ planTopic }) => (planTopic === null ? [] : [planTopic])))];
  }

  /** Plans taken since the start. */
  get taken(): number {
    return this.#taken;
  }

  /** Plans refused since the start, by cause. */
  get refused(): Readonly<Record<string, number>> {
    return Object.fromEntries(this.#refused);
  }

  /** The plan of an input, counted from the first input. */
  inForce(input: number): PlanInForce | null {
    return this.#slots[input]?.inForce ?? null;
  }

  /** How far plan and what came differed. */
  record(input: number): PlanRecord {
    return this.#slots[input]!.record;
  }

  /** Takes a message in, for every input whose plan topic it came on. nowMs  null where the time is not known */
  take(topic: string, payload: Uint8Array, nowMs: number | null): PlanOutcome[] {
    return this.#site.inputs.flatMap(({ planTopic }, u) =>
      planTopic !== null && (planTopic === topic || matchesFilter(planTopic, topic))
        ? [this.#offer(u, payload, nowMs)]
        : [],
    );
  }

  /** What came at a tick, (nc) in units: held against what was planned. */
  came(tick: number, values: Float64Array): void {
    const first = this.#site.signals.length;
    for (let u = 0; u < this.#slots.length; u++) this.#slots[u]!.record.came(tick, values[first + u]!);
  }

  /**
   * What is planned for the ticks after `tick`; plans that end before are dropped.
   *
   * out      (nu × H) standardised, NaN where nothing is planned
   * returns  whether anything is
   */
  fill(model: Model, tick: number, out: Float64Array): boolean {
    const { signals, tickMs, inputs } = this.#site;
    const H = model.horizon;
    if (this.#window.length !== out.length) this.#resize(H);
    let isPlanned = false;
    for (let u = 0; u < inputs.length; u++) {
      const slot = this.#slots[u]!;
      if (slot.inForce !== null && slot.inForce.plan.endMs <= (tick + 1) * tickMs) slot.inForce = null;
      const mean = model.mean[signals.length + u]!;
      const scale = model.scale[signals.length + u]!;
      for (let h = 1; h <= H; h++) {
        const at = u * H + h - 1;
        const plan = slot.inForce?.plan;
        const value = plan === undefined ? Number.NaN : planAtTick(plan, inputs[u]!.aggregate, tick + h, tickMs);
        this.#window[at] = value;
        out[at] = (value - mean) / scale;
        if (!Number.isNaN(value)) isPlanned = true;
      }
      slot.record.planned(tick, this.#window, u * H);
    }
    return isPlanned;
  }

  /** For a bundle with another horizon than the site file's. */
  #resize(horizon: number): void {
    this.#window = new Float64Array(this.#slots.length * horizon);
    for (const slot of this.#slots) slot.record = new PlanRecord(horizon);
  }

  #offer(u: number, payload: Uint8Array, nowMs: number | null): PlanOutcome {
    const input = this.#site.inputs[u]!.name;
    const slot = this.#slots[u]!;
    const found = this.#judge(u, payload, nowMs);
    const isSame = Buffer.compare(slot.payload, payload) === 0 && slot.outcome === found.kind + found.cause;
    slot.payload = payload.slice();
    slot.outcome = found.kind + found.cause;
    if (isSame && payload.length > 0) return { input, kind: 'known', cause: '', text: '' };
    if (found.kind === 'taken') {
      this.#taken++;
      slot.inForce = found.inForce;
    } else if (found.kind === 'withdrawn') slot.inForce = null;
    else this.#refused.set(found.cause, (this.#refused.get(found.cause) ?? 0) + 1);
    return { input, kind: found.kind, cause: found.cause, text: found.text };
  }

  #judge(
    u: number,
    payload: Uint8Array,
    nowMs: number | null,
  ): { kind: 'taken' | 'withdrawn' | 'refused'; cause: string; text: string; inForce: PlanInForce | null } {
    if (payload.length === 0) return { kind: 'withdrawn', cause: '', text: '', inForce: null };
    const { tickMs, horizon, inputs } = this.#site;
    try {
      const plan = parsePlan(payload, { tickMs, horizon, range: inputs[u]!.range, nowMs });
      const madeAtMs = Math.min(plan.issuedAtMs ?? Number.POSITIVE_INFINITY, nowMs ?? plan.issuedAtMs ?? Number.NaN);
      const { inForce } = this.#slots[u]!;
      // By our clock: a maker whose clock is ahead must not shut out its own later plans.
      const ruling = inForce === null || inForce.plan.issuedAtMs === null ? Number.NaN : inForce.madeAtMs;
      if (plan.issuedAtMs === null || !(plan.issuedAtMs < ruling))
        return { kind: 'taken', cause: '', text: '', inForce: { plan, madeAtMs } };
      const [got, than] = [plan.issuedAtMs, ruling].map((ms) => new Date(ms).toISOString());
      const text = `plan: issued_at: expected ${than} or later, when the ruling plan was made, got ${got}`;
      return { kind: 'refused', cause: 'stale', text, inForce: null };
    } catch (error) {
      const reason = error instanceof ProtocolError ? error.details.reason : undefined;
      const cause = typeof reason === 'string' ? reason : 'syntax';
      return { kind: 'refused', cause, text: (error as Error).message, inForce: null };
    }
  }
}
