/**
 * How fast this machine is now, beside the one the constants were measured on: a short loop of known work, of the kinds a fit
 * does: products of numbers, and bytes looked at one by one.
 */

const NUMBERS = 4096;
const PRODUCT_ROUNDS = 1200;
const SCAN_ROUNDS = 60;
const TEXT_BYTES = 1 << 16;
/** The least of so many tries: whatever else the machine does only ever makes it slower. */
const TRIES = 7;

function work(a: Float64Array, b: Float64Array, text: Uint8Array): number {
  let sum = 0;
  for (let round = 0; round < PRODUCT_ROUNDS; round++) {
    let dot = 0;
    for (let k = 0; k < NUMBERS; k++) dot += a[k] * b[k];
    sum += dot;
  }
  for (let round = 0; round < SCAN_ROUNDS; round++) {
    let value = 0;
    for (let k = 0; k < TEXT_BYTES; k++) {
      const byte = text[k] - 48;
      if (byte >= 0 && byte < 10) value = (10 * value + byte) % 65_521;
      else sum += value;
    }
  }
  return sum;
}

/** Seconds of the loop. */
export function probeSeconds(): number {
  const a = Float64Array.from({ length: NUMBERS }, (_, k) => 1 / (k + 1));
  const b = Float64Array.from({ length: NUMBERS }, (_, k) => 1 + (k % 7));
  const text = Uint8Array.from({ length: TEXT_BYTES }, (_, k) => 44 + ((k * 7) % 14));
  let least = Number.POSITIVE_INFINITY;
  let check = 0;
  for (let k = 0; k < TRIES; k++) {
    const start = performance.now();
    check += work(a, b, text);
    least = Math.min(least, (performance.now() - start) / 1000);
  }
  return Number.isFinite(check) ? least : Number.NaN;
}
