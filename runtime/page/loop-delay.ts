/**
 * How late the gateway's own pulse comes: what everything else on its loop waits as well. Costs two additions a pulse, where a
 * timer of its own would wake the machine a hundred times a second.
 */

const SLOT_MS = 10_000;
const SLOTS = 6;

/** See the file head. */
export class LoopDelay {
  count = 0;
  sumMs = 0;
  readonly #largest = new Float64Array(SLOTS);
  readonly #slots = new Float64Array(SLOTS).fill(-1);

  /** One pulse that came `lateMs` after it was due. nowMs  of a clock that never steps back */
  pulse(lateMs: number, nowMs: number): void {
    const late = Math.max(0, lateMs);
    const slot = Math.floor(nowMs / SLOT_MS);
    const at = slot % SLOTS;
    if (this.#slots[at] !== slot) {
      this.#slots[at] = slot;
      this.#largest[at] = 0;
    }
    this.count++;
    this.sumMs += late;
    if (late > this.#largest[at]!) this.#largest[at] = late;
  }

  /** The largest of the last minute, to ten seconds. */
  largestMs(nowMs: number): number {
    const newest = Math.floor(nowMs / SLOT_MS);
    let largest = 0;
    for (let at = 0; at < SLOTS; at++)
      if (newest - this.#slots[at]! < SLOTS) largest = Math.max(largest, this.#largest[at]!);
    return largest;
  }
}
