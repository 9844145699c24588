/** Standard normal numbers from a seeded uniform sequence, by Box and Muller (1958). */
export function gaussians(random: () => number): () => number {
  return () => Math.sqrt(-2 * Math.log(1 - random())) * Math.cos(2 * Math.PI * random());
}
