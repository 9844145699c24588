/**
 * Fourier transforms of lengths that are powers of two: passes of radix 4 from one pair of buffers to the other and back,
 * one of radix 2 at the end where the length asks for it. Transforms of real series go by one of half the length.
 */
import type { Arena } from './arena.ts';
import type { FourierLoops, Pointer } from './core.ts';
import { turn } from './turns.ts';

/** A pass of radix 4 with m factors, or where m is nought one of radix 2. */
interface Pass {
  readonly m: number;
  readonly s: number;
  readonly factors: Pointer;
}

interface Plan {
  readonly passes: readonly Pass[];
}

/** The plans of one memory; each length's tables are made once and stay. */
export class FourierPlans {
  readonly #core: FourierLoops;
  readonly #arena: Arena;
  readonly #plans = new Map<number, Plan>();
  readonly #turns = new Map<number, Pointer>();

  constructor(core: FourierLoops, arena: Arena) {
    this.#core = core;
    this.#arena = arena;
  }

  /**
   * X_k = Σ x_t exp(-2πi kt/n) in place.
   *
   * shapes  re, im (n), n a power of two
   * units   as the input's
   * throws  RangeError where n is no power of two or the memory is full (scratch 16 n bytes, tables 16 n bytes once)
   * source  Van Loan, Computational Frameworks for the Fast Fourier Transform (1992), section 1.7
   * cost    4.25 n log2 n operations
   */
  transform(re: Pointer, im: Pointer, n: number): void {
    this.#plan(n);
    const mark = this.#arena.mark();
    const yr = this.#arena.takeRaw(16 * n);
    const yi = yr + 8 * n;
    if (this.#run(re, im, yr, yi, n)) {
      const bytes = new Uint8Array(this.#arena.buffer);
      bytes.copyWithin(re, yr, yr + 8 * n);
      bytes.copyWithin(im, yi, yi + 8 * n);
    }
    this.#arena.release(mark);
  }

  /**
   * The first n/2 + 1 values of the transform of n real ones; x is kept.
   *
   * shapes  x (n), re, im (n/2 + 1), n a power of two
   * units   as the input's
   * throws  as `transform`
   * source  Press et al., Numerical Recipes, 3rd ed. (2007), section 12.3.2
   * cost    half a transform of n
   */
  real(x: Pointer, re: Pointer, im: Pointer, n: number): void {
    if (n === 1) {
      new Float64Array(this.#arena.buffer, re, 1)[0] = new Float64Array(this.#arena.buffer, x, 1)[0];
      new Float64Array(this.#arena.buffer, im, 1)[0] = 0;
      return;
    }
    const half = n / 2;
    const turns = this.#turn(half);
    // Begun on the side from which the last pass ends in re and im.
    const isOdd = this.#plan(half).passes.length % 2 === 1;
    const mark = this.#arena.mark();
    const yr = this.#arena.takeRaw(8 * n);
    const yi = yr + 8 * half;
    const [fromR, fromI, toR, toI] = isOdd ? [yr, yi, re, im] : [re, im, yr, yi];
    this.#core.split(x, fromR, fromI, half);
    this.#run(fromR, fromI, toR, toI, half);
    this.#core.untangle(re, im, turns, half);
    this.#arena.release(mark);
  }

  /**
   * The n real values whose transform begins with the n/2 + 1 given; those are overwritten.
   *
   * shapes  re, im (n/2 + 1), x (n), n a power of two; the imaginary parts of the first and the last are taken as zero
   * units   as the input's
   * throws  as `transform`
   * source  Press et al. (2007), section 12.3.2
   * cost    half a transform of n
   */
  realInverse(re: Pointer, im: Pointer, x: Pointer, n: number): void {
    if (n === 1) {
      new Float64Array(this.#arena.buffer, x, 1)[0] = new Float64Array(this.#arena.buffer, re, 1)[0];
      return;
    }
    const half = n / 2;
    this.#plan(half);
    const turns = this.#turn(half);
    const mark = this.#arena.mark();
    const yr = this.#arena.takeRaw(8 * n);
    const yi = yr + 8 * half;
    this.#core.tangle(re, im, turns, half);
    // Real and imaginary parts change places, which turns the transform into its inverse.
    const isBeyond = this.#run(im, re, yi, yr, half);
    this.#core.join(x, isBeyond ? yr : re, isBeyond ? yi : im, 1 / n, half);
    this.#arena.release(mark);
  }

  /** All passes from x to y and back; true where the result is in y. */
  #run(xr: Pointer, xi: Pointer, yr: Pointer, yi: Pointer, n: number): boolean {
    const { passes } = this.#plan(n);
    let isBeyond = false;
    for (const { m, s, factors } of passes) {
      const [fromR, fromI, toR, toI] = isBeyond ? [yr, yi, xr, xi] : [xr, xi, yr, yi];
      if (m === 0) this.#core.pass2(fromR, fromI, toR, toI, s);
      else this.#core.pass4(fromR, fromI, toR, toI, factors, m, s);
      isBeyond = !isBeyond;
    }
    return isBeyond;
  }

  #plan(n: number): Plan {
    if (!(n >= 1) || (n & (n - 1)) !== 0)
      throw new RangeError(`A Fourier transform of ${n} values: expected a power of two.`);
    let plan = this.#plans.get(n);
    if (plan === undefined) {
      const passes: Pass[] = [];
      let left = n;
      for (; left >= 4; left /= 4) passes.push({ m: left / 4, s: n / left, factors: this.#factors(left) });
      if (left === 2) passes.push({ m: 0, s: n / 2, factors: 0 });
      plan = { passes };
      this.#plans.set(n, plan);
    }
    return plan;
  }

  /** Cos and sin of w^p, w^2p, w^3p, w = exp(-2πi/n), p < n/4. */
  #factors(n: number): Pointer {
    const m = n / 4;
    const at = this.#arena.takeTable(8 * 6 * m);
    const table = new Float64Array(this.#arena.buffer, at, 6 * m);
    for (let p = 0; p < m; p++) {
      for (let j = 1; j <= 3; j++) {
        const [cos, sin] = turn(j * p, n);
        table[(2 * j - 2) * m + p] = cos;
        table[(2 * j - 1) * m + p] = -sin;
      }
    }
    return at;
  }

  /** Cos and sin of exp(-πi k/half), k <= half/2. */
  #turn(half: number): Pointer {
    let at = this.#turns.get(half);
    if (at === undefined) {
      const count = (half >> 1) + 1;
      at = this.#arena.takeTable(16 * count);
      const table = new Float64Array(this.#arena.buffer, at, 2 * count);
      for (let k = 0; k < count; k++) {
        const [cos, sin] = turn(k, 2 * half);
        table[k] = cos;
        table[count + k] = -sin;
      }
      this.#turns.set(half, at);
    }
    return at;
  }
}
