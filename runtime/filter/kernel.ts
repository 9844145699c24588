/**
 * What a kind of model must be able to do; everything else (clips, guards, fading, bounds, crossing, snapshots' frame,
 * probe) is common to all kinds. A kind is one kernel in one file; kernels.ts finds it by the model's `kind`.
 */
import type { CommonModel } from './model.ts';
import type { FilterState } from './state.ts';

/** A kind's buffers: its memories, and what is worked out from them. Allocated once. */
export interface Core {
  /** (d) the predictive state, as published. */
  readonly x: Float64Array;
}

/** Numbers that a snapshot holds for a kind: the memories that move one-step predictions, and nothing else. */
export interface MemoryLayout {
  /** Numbers of each channel. */
  readonly perChannel: number;
  /** Numbers that belong to no channel alone. */
  readonly shared: number;
}

/**
 * The operations of one kind. What a kernel takes for the value of a channel is `state.rest`, which is the value folded in less
 * the round (round.ts); where a kind's models never have a round, `state.value` is the same. Only + − × ÷ √ on float64 and integer operations, in a fixed order; nothing allocates but
 * createCore.
 *
 * shapes  nc channels, ny signals, nu = nc − ny inputs, H horizon
 * units   standardised
 */
export interface Kernel<M extends CommonModel, C extends Core> {
  /** throws  FilterError 'model' naming the part of the kind that cannot be computed with */
  check(model: M): void;
  /** What gives a snapshot's numbers their meaning, beside scaling and counts. */
  fingerprint(model: M): readonly Float64Array[];
  /** Ticks until the start of a run no longer shows. */
  settlingTicks(model: M): number;
  /** All buffers there will ever be, as before the first tick: every channel at its mean. */
  createCore(model: M): C;
  memoryLayout(model: M): MemoryLayout;
  /** Copies the memories of a channel (or the shared ones, channel −1) to `out` from `at`, in one canonical order. */
  copyOut(model: M, core: C, channel: number, out: Float64Array, at: number): void;
  /** The way back. */
  copyIn(model: M, core: C, channel: number, from: Float64Array, at: number): void;
  /** Once a tick, before any channel: `state.rest` still holds the values of the tick before; not at the first tick. */
  beforeTick(model: M, core: C, state: FilterState): void;
  /** First reading of a channel: its memories as if its past always had been `state.rest[channel]`. */
  settle(model: M, core: C, state: FilterState, channel: number): void;
  /** Moves a channel's memories on with `state.rest[channel]`, instead of `settle` at all later ticks. */
  advance(model: M, core: C, state: FilterState, channel: number): void;
  /**
   * Moves a channel's memories as if its values of the last `missed` ticks had each lain higher by `step`, 2 × `step`, … up to
   * missed × `step` at the tick before this one; before `advance`. Absent: the kind's memories cannot be moved so.
   */
  bridge?(model: M, core: C, channel: number, missed: number, step: number): void;
  /** Whether `refresh` moves nothing that a later tick depends on, so that it may wait until somebody looks. */
  readonly isDerived?: true;
  /** Once a tick after all channels, and after a restore (`state.tick` ≥ 0): everything that follows from the memories. */
  refresh(model: M, core: C, state: FilterState): void;
  /** What each channel's own past looks like, (nc × count), for kinds that keep it; absent: they do not. */
  readonly own?: { count(model: M): number; features(core: C): Float64Array };
  /**
   * Equally probable paths, for kinds that draw some, as the last call of `paths` for the whole horizon left them; absent:
   * they do not. `away`: (… × count × H) how far each lies from the path forecast; `place`: which of these is a signal's,
   * −1: none.
   */
  readonly draws?: { readonly count: number; away(core: C): Float64Array; place(model: M, signal: number): number };
  /**
   * Path of every signal for steps 1 … `steps` ≤ H, before fading and clipping: `out` (ny × steps), step h at i·steps + h − 1.
   * `plan` (nu × H), NaN where an input is not planned; null: no plan. One-step predictions never see a plan.
   */
  paths(model: M, core: C, state: FilterState, steps: number, plan: Float64Array | null, out: Float64Array): void;
}
