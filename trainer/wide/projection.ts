/**
 * Random projections: a vector of many numbers, such as a camera's frame, becomes a few thousand whose distances are nearly
 * those between the vectors (Johnson and Lindenstrauss 1984), whatever is in it and without having seen any. Linear, so that
 * sums, means and differences may be taken after it.
 */
import type { FeatureMap } from './feature-map.ts';
import { powerOfTwo } from './power-of-two.ts';
import { openRandom, shuffled } from './random.ts';
import { copySigned, drawSigns } from './signs.ts';
import { workspaceOf } from './workspace.ts';

/** Constructions by name. */
export const PROJECTION_KINDS = ['hadamard', 'sparse'] as const;
/** One of them. */
export type ProjectionKind = (typeof PROJECTION_KINDS)[number];

/** What a projection is made from. */
export interface ProjectionShape {
  readonly inputs: number;
  readonly outputs: number;
  readonly seed: number;
}

/**
 * Numbers that keep all squared distances among `points` vectors within a share ε of what they are, with some chance.
 *
 * shapes  none
 * units   none
 * throws  RangeError where ε is not between 0 and 1
 * source  Dasgupta and Gupta, Random Structures and Algorithms 22 (2003), theorem 2.1: 4 ln n / (ε²/2 − ε³/3)
 * cost    O(1)
 */
export function johnsonLindenstrauss(points: number, share: number): number {
  if (!(share > 0 && share < 1)) throw new RangeError(`share: expected between 0 and 1, got ${share}`);
  return Math.ceil((4 * Math.log(points)) / (share ** 2 / 2 - share ** 3 / 3));
}

/**
 * The projection to take where nothing else is asked for.
 *
 * shapes  as ProjectionShape
 * units   as the inputs
 * throws  RangeError for a shape no projection can have
 * source  measured: suite `training`, cases "projection"
 * cost    as hadamardProjection, which costs no more than a count sketch and loses no distance
 */
export function createProjection(shape: ProjectionShape, kind: ProjectionKind = 'hadamard'): FeatureMap {
  return kind === 'sparse' ? sparseProjection(shape, SPARSE_SIGNS) : hadamardProjection(shape);
}

/** Non-zeros in a column of the sparse kind; 1 is the count sketch. */
const SPARSE_SIGNS = 4;

/**
 * Random signs, one transform of the whole vector, and a random choice of what comes out.
 *
 * shapes  as ProjectionShape; outputs at most the least power of two that holds the inputs
 * units   as the inputs
 * throws  RangeError for a shape no projection can have
 * source  Ailon and Chazelle (2006), as the subsampled transform of Tropp, Advances in Adaptive Data Analysis 3 (2011), section 1
 * cost    n log n additions, n the power of two; 5 n bytes
 */
export function hadamardProjection(shape: ProjectionShape): FeatureMap {
  const { inputs, outputs, seed } = checked(shape);
  const n = powerOfTwo(inputs);
  if (outputs > n) throw new RangeError(`outputs: expected at most ${n}, got ${outputs}`);
  const random = openRandom(seed);
  const signs = drawSigns(random, inputs);
  const taken = shuffled(random, n).slice(0, outputs).sort();
  const workspace = workspaceOf(n);
  const { numbers: v } = workspace;
  const scale = 1 / Math.sqrt(outputs);
  return {
    inputs,
    outputs,
    bytes: 4 * (inputs + outputs + n),
    apply(x, out) {
      copySigned(x, signs, 0, inputs, workspace);
      v.fill(0, inputs);
      workspace.hadamard();
      for (let j = 0; j < outputs; j++) out[j] = scale * v[taken[j]];
    },
  };
}

/**
 * Every input is added, with random signs, to a few outputs: as many runs of outputs as non-zeros, one place in each.
 *
 * shapes  as ProjectionShape; nonZeros divides the outputs
 * units   as the inputs
 * throws  RangeError for a shape no projection can have
 * source  Kane and Nelson, Journal of the ACM 61 (2014), the block construction; with one non-zero the count sketch of
 *         Charikar, Chen and Farach-Colton (2002), as Clarkson and Woodruff (2013) use it, which may lose the distance of two
 *         vectors that differ in few places
 * cost    inputs × nonZeros additions; 4 bytes each
 */
export function sparseProjection(shape: ProjectionShape, nonZeros: number): FeatureMap {
  const { inputs, outputs, seed } = checked(shape);
  const run = outputs / nonZeros;
  if (!(Number.isInteger(run) && run >= 1))
    throw new RangeError(`outputs: expected a multiple of ${nonZeros}, got ${outputs}`);
  const random = openRandom(seed);
  // Place and sign in one number: twice the place, and one more where the sign is minus.
  const places = Uint32Array.from(
    { length: inputs * nonZeros },
    (_, k) => 2 * ((k % nonZeros) * run + random.below(run)) + (random.sign() < 0 ? 1 : 0),
  );
  const sum = new Float32Array(2 * outputs);
  const scale = 1 / Math.sqrt(nonZeros);
  return {
    inputs,
    outputs,
    bytes: 4 * (places.length + sum.length),
    apply(x, out) {
      sum.fill(0);
      for (let k = 0, at = 0; k < inputs; k++) {
        const value = x[k];
        for (const end = at + nonZeros; at < end; at++) sum[places[at]] += value;
      }
      for (let j = 0; j < outputs; j++) out[j] = scale * (sum[2 * j] - sum[2 * j + 1]);
    },
  };
}

function checked(shape: ProjectionShape): ProjectionShape {
  for (const name of ['inputs', 'outputs'] as const) {
    const value = shape[name];
    if (!(Number.isInteger(value) && value >= 1)) throw new RangeError(`${name}: expected 1 or more, got ${value}`);
  }
  return shape;
}
