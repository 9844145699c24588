/**
 * What a gatherer holds while it is at work, as bytes: every open sum as it is, so that going on from them is going on from
 * where they were taken, to the bit. Each part has one method, `carry`, that names its state once; it is handed a carrier that
 * takes the state along, or one that brings it back.
 */
import { TrainError } from '../errors.ts';
import { type EnvelopeKind, openEnvelope, sealEnvelope } from './envelope.ts';
import type { FactorsShape } from './factors.ts';

/** Raise it with every change of what is carried, or in which order. */
const STATE: EnvelopeKind = { magic: 'swunsumd', version: 1, noun: 'snapshot of factors' };

/** Takes state along, or brings it back. */
export interface Carrier {
  /** A number as it is, or as it was. */
  number(value: number): number;
  /** Leaves a list as it is, or fills it as it was; the length must be known. */
  fill(list: Float64Array): void;
  /** A list of any length as it is, or as it was. */
  list(list: Float64Array): Float64Array;
  /** The same of bytes. */
  flags(list: Uint8Array): Uint8Array;
}

/** Takes along. */
class Taking implements Carrier {
  readonly parts: (Float64Array | Uint8Array)[] = [];

  number(value: number): number {
    this.parts.push(Float64Array.of(value));
    return value;
  }

  fill(list: Float64Array): void {
    this.parts.push(list);
  }

  list(list: Float64Array): Float64Array {
    this.number(list.length);
    this.parts.push(list);
    return list;
  }

  flags(list: Uint8Array): Uint8Array {
    this.number(list.length);
    this.parts.push(list);
    return list;
  }
}

/** Brings back. */
class Bringing implements Carrier {
  readonly #body: Float64Array;
  #at = 0;

  constructor(body: Float64Array) {
    this.#body = body;
  }

  number(): number {
    return this.#next(1)[0];
  }

  fill(list: Float64Array): void {
    list.set(this.#next(list.length));
  }

  list(): Float64Array {
    return this.#next(this.number()).slice();
  }

  flags(): Uint8Array {
    return Uint8Array.from(this.#next(this.number()));
  }

  end(): void {
    if (this.#at !== this.#body.length) throw new RangeError(`${this.#body.length} numbers, ${this.#at} of them known`);
  }

  #next(length: number): Float64Array {
    const from = this.#at;
    this.#at += length;
    if (!(length >= 0) || this.#at > this.#body.length) throw new RangeError(`${this.#body.length} numbers, too few`);
    return this.#body.subarray(from, this.#at);
  }
}

/**
 * The state as bytes; what it is taken from goes on untouched.
 *
 * shapes  none
 * units   bytes
 * throws  nothing
 * source  file head
 * cost    the size of the state: most of it nc² · 1.5 · (reach, at most 24,576 and an eighth of it) numbers
 */
export function takeState(shape: FactorsShape, carry: (carrier: Carrier) => void): Uint8Array {
  const taking = new Taking();
  carry(taking);
  return sealEnvelope(STATE, JSON.stringify(shape), taking.parts);
}

/**
 * Brings the state back into parts made for the same shape.
 *
 * shapes  none
 * units   bytes
 * throws  TrainError 'factors' if the bytes are damaged, of another version or of another shape
 * source  file head
 * cost    the size of the state
 */
export function bringState(shape: FactorsShape, bytes: Uint8Array, carry: (carrier: Carrier) => void): void {
  const refuse = (what: string, cause?: unknown): never => {
    throw new TrainError('factors', `what was learned before the interrupt is of no use: ${what}; begin anew`, {
      cause,
    });
  };
  const { head, body } = openEnvelope(STATE, bytes, refuse);
  if (head.trimEnd() !== JSON.stringify(shape)) refuse('it is of another site or of other options');
  const bringing = new Bringing(body);
  try {
    carry(bringing);
    bringing.end();
  } catch (cause) {
    refuse('its sizes contradict each other', cause);
  }
}
