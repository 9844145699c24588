/**
 * A Sparkplug B payload: time, sequence number, metrics (Sparkplug 3.0 section 6.4.5). Read where it lies, each metric as
 * often as asked for.
 */
import { Metric } from './metric.ts';
import { BYTES, VARINT, WireReader } from './wire.ts';

const TIMESTAMP = 1;
const METRICS = 2;
const SEQ = 3;

/** Names of the metrics of a payload, at most so many; none where it is no payload. */
export const metricNames = (payload: Uint8Array, most: number): readonly string[] => {
  const reader = new PayloadReader();
  const names: string[] = [];
  if (reader.open(payload))
    reader.visit(({ name }) => {
      if (name !== null && names.length < most) names.push(name);
    });
  return names;
};

/** Reads payloads, one after the other. */
export class PayloadReader {
  readonly #fields = new WireReader();
  readonly #metric = new Metric();
  #bytes: Uint8Array = new Uint8Array(0);
  /** Ms since 1970; NaN where absent. */
  timeMs = Number.NaN;
  /** -1 where absent, as in deaths. */
  seq = -1;

  /** Takes up a payload; false where it is malformed, in its metrics too. */
  open(bytes: Uint8Array): boolean {
    this.#bytes = bytes;
    this.timeMs = Number.NaN;
    this.seq = -1;
    const fields = this.#fields;
    fields.open(bytes, 0, bytes.length);
    while (fields.next()) {
      if (fields.wire === VARINT && fields.field === TIMESTAMP) this.timeMs = fields.unsigned;
      else if (fields.wire === VARINT && fields.field === SEQ) this.seq = fields.unsigned;
      else if (fields.field === METRICS && fields.wire === BYTES) {
        if (!this.#metric.read(bytes, fields.from, fields.to)) return false;
      }
    }
    return !fields.isBad;
  }

  /** Visits the metrics in their order; the object is the same each time. */
  visit(see: (metric: Metric) => void): void {
    const fields = this.#fields;
    fields.open(this.#bytes, 0, this.#bytes.length);
    while (fields.next()) {
      if (fields.field !== METRICS || fields.wire !== BYTES) continue;
      if (this.#metric.read(this.#bytes, fields.from, fields.to)) see(this.#metric);
    }
  }
}
