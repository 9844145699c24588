/**
 * Seeded random numbers for maps and projections: sfc32 (Doty-Humphrey, PractRand, public domain, from memory), seeded by
 * steps of splitmix32, so that neighbouring seeds are far apart. Maps are never sealed into a bundle, so that the last bits
 * of a logarithm, which the language leaves open, may differ from machine to machine.
 */

/** One stream of random numbers. */
export interface Random {
  /** Uniform in [0, 1), 32 bits of resolution. */
  uniform(): number;
  /** Standard normal (Box and Muller 1958). */
  normal(): number;
  /** −1 or 1. */
  sign(): number;
  /** Whole number from 0 to below n. */
  below(n: number): number;
}

/** Opens the stream of a seed; another `stream` of the same seed has nothing to do with it. */
export function openRandom(seed: number, stream = 0): Random {
  let [a, b, c, d] = seedWords(seed, stream);
  let spare = Number.NaN;
  const next = (): number => {
    const t = (((a + b) | 0) + d) | 0;
    d = (d + 1) | 0;
    a = b ^ (b >>> 9);
    b = (c + (c << 3)) | 0;
    c = (c << 21) | (c >>> 11);
    c = (c + t) | 0;
    return t >>> 0;
  };
  for (let i = 0; i < 12; i++) next();
  const uniform = (): number => next() / 4294967296;
  const normal = (): number => {
    if (!Number.isNaN(spare)) {
      const kept = spare;
      spare = Number.NaN;
      return kept;
    }
    const radius = Math.sqrt(-2 * Math.log(1 - uniform()));
    const angle = 2 * Math.PI * uniform();
    spare = radius * Math.sin(angle);
    return radius * Math.cos(angle);
  };
  return { uniform, normal, sign: () => (next() & 1) * 2 - 1, below: (n) => Math.floor(uniform() * n) };
}

function seedWords(seed: number, stream: number): [number, number, number, number] {
  let state = Math.imul(seed, 0x9e3779b1) ^ Math.imul(stream + 1, 0x85ebca77);
  const draw = (): number => {
    state = (state + 0x9e3779b9) | 0;
    let z = state;
    z = Math.imul(z ^ (z >>> 16), 0x85ebca6b);
    z = Math.imul(z ^ (z >>> 13), 0xc2b2ae35);
    return z ^ (z >>> 16);
  };
  return [draw(), draw(), draw(), draw()];
}

/**
 * Length of a vector of n standard normal numbers, without drawing them: the root of twice a gamma draw of shape n/2.
 * Gamma by Marsaglia and Tsang (ACM Transactions on Mathematical Software 26, 2000), for shapes of 1 and more.
 */
export function normalLength(random: Random, n: number): number {
  if (n === 1) return Math.abs(random.normal());
  const d = n / 2 - 1 / 3;
  const c = 1 / Math.sqrt(9 * d);
  for (;;) {
    const x = random.normal();
    const v = (1 + c * x) ** 3;
    if (v > 0 && Math.log(1 - random.uniform()) < 0.5 * x * x + d - d * v + d * Math.log(v))
      return Math.sqrt(2 * d * v);
  }
}

/** Numbers from 0 to below n in random order (Fisher and Yates 1938; Durstenfeld 1964). */
export function shuffled(random: Random, n: number): Uint32Array {
  const order = Uint32Array.from({ length: n }, (_, k) => k);
  for (let k = n - 1; k > 0; k--) {
    const j = random.below(k + 1);
    [order[k], order[j]] = [order[j], order[k]];
  }
  return order;
}
