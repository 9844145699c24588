/**
 * A gateway lives in a box with little memory. V8 would let garbage pile up to several times the living heap before it
 * looks; a gateway makes little garbage and can afford to look sooner. The size of the nursery, and leave to ask for the
 * first look, can only be given on the command line: stillwell-gateway.js does.
 */
import { setFlagsFromString } from 'node:v8';

/** By then code is loaded, the first bundle checked, and what that took is garbage. */
const SETTLED_MS = 4000;

/** Keeps the heap near its living size from now on. For the start of a process, not for a library's user. */
export function keepHeapSmall(): void {
  setFlagsFromString('--heap-growing-percent=10');
  // V8 lets a young heap grow to many times its size before it looks the first time; from then on it goes by what lives.
  setTimeout(() => globalThis.gc?.(), SETTLED_MS).unref();
}
