/**
 * Seeded random numbers of the demo: same seed, same weather, same doors, same faults.
 * The generator is sfc32 (Doty-Humphrey, PractRand, public domain, from memory), seeded by splitmix32 steps of a hash of
 * the name, so that each plant, sensor and fault draws from its own stream and adding one moves none of the others.
 * Not for keys or signatures.
 */

/** One stream of random numbers. */
export interface Random {
  /** Uniform in [0, 1), 32 bits of resolution. */
  uniform(): number;
  /** Standard normal (Box and Muller 1958). */
  normal(): number;
  /** Exponential with the given mean. */
  exponential(mean: number): number;
}

/** Opens the stream of `name` under `seed`. */
export function openRandom(seed: number, name: string): Random {
  const words = seedWords(seed, name);
  let [a, b, c, d] = words;
  let spare = Number.NaN;

  const next = (): number => {
    const t = (((a + b) | 0) + d) | 0;
    d = (d + 1) | 0;
    a = b ^ (b >>> 9);
    b = (c + (c << 3)) | 0;
    c = (c << 21) | (c >>> 11);
    c = (c + t) | 0;
    return (t >>> 0) / 4294967296;
  };
  for (let i = 0; i < 12; i++) next();

  const normal = (): number => {
    if (!Number.isNaN(spare)) {
      const kept = spare;
      spare = Number.NaN;
      return kept;
    }
    const radius = Math.sqrt(-2 * Math.log(1 - next()));
    const angle = 2 * Math.PI * next();
    spare = radius * Math.sin(angle);
    return radius * Math.cos(angle);
  };
  return { uniform: next, normal, exponential: (mean) => -mean * Math.log(1 - next()) };
}

/** Four words from seed and name: FNV-1a over the name, then splitmix32. */
function seedWords(seed: number, name: string): [number, number, number, number] {
  let hash = 0x811c9dc5 ^ seed;
  for (let i = 0; i < name.length; i++) hash = Math.imul(hash ^ name.charCodeAt(i), 0x01000193);
  const draw = (): number => {
    hash = (hash + 0x9e3779b9) | 0;
    let z = hash;
    z = Math.imul(z ^ (z >>> 16), 0x85ebca6b);
    z = Math.imul(z ^ (z >>> 13), 0xc2b2ae35);
    return z ^ (z >>> 16);
  };
  return [draw(), draw(), draw(), draw()];
}
