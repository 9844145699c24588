/**
 * Values a channel has shown, each owning the stretch half-way to its neighbours.
 *
 * Why: readings often lie on a coarser lattice than their decimals (a converter's counts scaled to units and rounded:
 * common practice), so most decimals never occur. A forecast's probability laid on the seen values alone names the next
 * one far more cheaply; a channel that uses its whole lattice loses nothing, since there every stretch is one step.
 */

/** Values kept; a channel with more keeps its first. */
const MAX_SEEN = 1024;

/** The distinct values that a channel has shown, and the stretch of the line that belongs to each. */
export class SeenValues {
  /** Ascending. */
  readonly #values = new Float64Array(MAX_SEEN);
  #count = 0;
  /** Ends of the stretch that `find` found. */
  low = 0;
  high = 0;

  /** Two values or more: enough for stretches to mean something. */
  get isReady(): boolean {
    return this.#count > 1;
  }

  /** Where, mirrored by `sign`, the first seen value of at least `x` begins its stretch; NaN where there is none. */
  edge(sign: number, x: number): number {
    const at = sign > 0 ? this.#first(x) : this.#first(1 - x);
    if (sign > 0) return at === this.#count ? Number.NaN : this.#lowerEdge(at);
    return at === 0 ? Number.NaN : -this.#lowerEdge(at);
  }

  /** Whether `index` was seen; then `low` and `high` are its stretch. */
  find(index: number): boolean {
    const at = this.#first(index);
    if (at === this.#count || this.#values[at] !== index) return false;
    this.low = this.#lowerEdge(at);
    this.high = this.#lowerEdge(at + 1);
    return true;
  }

  add(index: number): void {
    const at = this.#first(index);
    if (this.#count === MAX_SEEN || (at < this.#count && this.#values[at] === index)) return;
    this.#values.copyWithin(at + 1, at, this.#count);
    this.#values[at] = index;
    this.#count++;
  }

  /** Position of the first value of at least `x`. */
  #first(x: number): number {
    let low = 0;
    let high = this.#count;
    while (low < high) {
      const middle = (low + high) >> 1;
      if (this.#values[middle]! >= x) high = middle;
      else low = middle + 1;
    }
    return low;
  }

  /** Half-way between a value and the one below; the outermost stretches are symmetric. Needs two values. */
  #lowerEdge(at: number): number {
    const v = this.#values;
    if (at === 0) return v[0]! - (v[1]! - v[0]!) / 2;
    if (at === this.#count) return v[at - 1]! + (v[at - 1]! - v[at - 2]!) / 2;
    return (v[at - 1]! + v[at]!) / 2;
  }
}
