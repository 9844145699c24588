/**
 * Makes the segments a gateway would send, by filter and segment writer alone: no disk, no broker. Remembers the lattice
 * numbers it was fed, which is what a desk must give back.
 */

import { createHash } from 'node:crypto';
import type { Bundle } from '@stillwell/protocol';
import { bundleSchemaHash, encodeBundle, latticeIndex, latticeValue, SegmentWriter } from '@stillwell/protocol';
import {
  createState,
  type FilterState,
  type Model,
  modelFromBundle,
  predictNext,
  restoreState,
  runProbe,
  saveState,
  update,
} from '@stillwell/runtime/filter';
import { type ModelChoice, syntheticBundle } from './models.ts';

/** A synthetic bundle with a probe that holds, as bytes and as model. */
export function sealableBundle(choice: ModelChoice = {}): { document: Uint8Array; bundle: Bundle; model: Model } {
  const bare = syntheticBundle(choice);
  const model = modelFromBundle(bare);
  const run = runProbe(model, 5, 40);
  const digest = Uint8Array.from(createHash('sha256').update(run.outputs).digest());
  const bundle = { ...bare, schema: bundleSchemaHash(bare), probe: { seed: 5, ticks: 40, digest, last: run.last } };
  return { document: encodeBundle(bundle), bundle, model };
}

/** One segment made, and what went into it. */
export interface MadeSegment {
  readonly number: number;
  readonly bytes: Uint8Array;
  readonly firstTick: number;
  /** (nc) each tick, lattice indices. */
  readonly rows: readonly Float64Array[];
}

/** A gateway's residual side in miniature. */
export class SegmentMaker {
  readonly made: MadeSegment[] = [];
  /** Lattice index by `tick channel`, as the filter saw it and as corrected. */
  readonly original = new Map<string, number>();
  readonly corrected = new Map<string, number>();
  readonly ticks = new Set<number>();
  readonly #names: { site: string; gateway: string; stream: Uint8Array };
  #model: Model;
  #digest: Uint8Array;
  #state: FilterState;
  #number = 0;
  #writer: SegmentWriter | null = null;
  #rows: Float64Array[] = [];
  #isKeyed = true;
  #firstTick = 0;

  constructor(site: string, gateway: string, document: Uint8Array, model: Model, stream = 1) {
    this.#names = { site, gateway, stream: new Uint8Array(8).fill(stream) };
    this.#model = model;
    this.#digest = digestOf(document);
    this.#state = createState(model);
  }

  /** Folds in one tick of readings in units, NaN missing. */
  tick(tick: number, readings: Float64Array): void {
    const nc = this.#model.channelCount;
    this.#writer ??= this.#open(tick);
    const predicted = new Float64Array(nc);
    const lattice = new Float64Array(nc);
    const seen = new Float64Array(nc);
    predictNext(this.#model, this.#state, predicted);
    for (let c = 0; c < nc; c++) {
      const [step, offset] = [this.#model.latticeStep[c]!, this.#model.latticeOffset[c]!];
      predicted[c] = (predicted[c]! - offset) / step;
      lattice[c] = latticeIndex(readings[c]!, step, offset);
      seen[c] = latticeValue(lattice[c]!, step, offset);
      if (Number.isNaN(lattice[c])) continue;
      this.original.set(`${tick} ${c}`, lattice[c]!);
      this.corrected.set(`${tick} ${c}`, lattice[c]!);
    }
    this.ticks.add(tick);
    this.#writer.push(lattice, predicted);
    this.#rows.push(lattice);
    update(this.#model, this.#state, tick, seen);
  }

  /** A late reading for a tick already closed. */
  correct(tick: number, channel: number, index: number): void {
    this.#writer ??= this.#open(this.#state.tick + 1);
    this.#writer.correct(tick, channel, index);
    this.corrected.set(`${tick} ${channel}`, index);
    this.ticks.add(tick);
  }

  /** Closes the running segment; the next one is chained unless something below says otherwise. */
  close(): void {
    if (this.#writer === null) return;
    const bytes = this.#writer.finish(saveState(this.#model, this.#state));
    this.made.push({ number: this.#number++, bytes, firstTick: this.#firstTick, rows: this.#rows });
    this.#writer = null;
    this.#rows = [];
    this.#isKeyed = false;
  }

  /** As a process that stops and resumes from its checkpoint. */
  restart(): void {
    this.close();
    this.#state = restoreState(this.#model, saveState(this.#model, this.#state));
  }

  /** Changes the bundle at a tick boundary, the new filter warmed on the rows given. */
  change(document: Uint8Array, model: Model, fromTick: number, warm: readonly Float64Array[]): void {
    this.close();
    this.#model = model;
    this.#digest = digestOf(document);
    this.#state = createState(model);
    warm.forEach((row, i) => {
      update(model, this.#state, fromTick + i, row);
    });
    this.#isKeyed = true;
  }

  #open(tick: number): SegmentWriter {
    const model = this.#model;
    this.#firstTick = tick;
    return new SegmentWriter({
      ...this.#names,
      number: this.#number,
      bundle: this.#digest,
      firstTick: tick,
      channelCount: model.channelCount,
      signalCount: model.signalCount,
      residualScaleSteps: Float64Array.from(
        { length: model.channelCount },
        (_, c) => (model.residualScale[c]! * model.scale[c]!) / model.latticeStep[c]!,
      ),
      startState: saveState(model, this.#state),
      keyed: this.#isKeyed,
    });
  }
}

function digestOf(document: Uint8Array): Uint8Array {
  return Uint8Array.from(createHash('sha256').update(document).digest());
}
