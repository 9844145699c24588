/**
 * Random Fourier features whose frequencies are never written down: blocks of products of signs, permutations and fast
 * Walsh-Hadamard transforms, so that a hundred thousand features of thousands of inputs cost what a few hundred plain ones
 * do. Two published constructions; `createFeatures` takes the one that measured best.
 *
 * Both work on blocks of n inputs, n the least power of two that holds them, zeros behind; a block gives n frequencies. Single
 * precision throughout: a feature errs by some 10⁻⁶ of its crest where phases are of a few turns, a thousandth of what random
 * features of any affordable count stray from their kernel.
 */
import { checkShape, type FeatureMap, type FeatureShape } from './feature-map.ts';
import { plainFeatures } from './plain-features.ts';
import { powerOfTwo } from './power-of-two.ts';
import { normalLength, openRandom, type Random, shuffled } from './random.ts';
import { drawSigns, flipSigns } from './signs.ts';
import { type Workspace, workspaceBytes, workspaceOf } from './workspace.ts';

/** Constructions by name. */
export const FEATURE_KINDS = ['plain', 'fastfood', 'orthogonal'] as const;
/** One of them. */
export type FeatureKind = (typeof FEATURE_KINDS)[number];

/** Blocks of fewer inputs hold too few signs to be random: shorter vectors are padded to it. */
const LEAST_BLOCK = 64;
/** Rounds of signs and transform in an orthogonal block. */
const ROUNDS = 3;

/**
 * The map to take where nothing else is asked for.
 *
 * shapes  as FeatureShape
 * units   of the width
 * throws  RangeError for a shape no map can have
 * source  measured: suite `training`, cases "features"
 * cost    O(outputs log inputs), O(outputs) kept
 */
export function createFeatures(shape: FeatureShape, kind: FeatureKind = 'orthogonal'): FeatureMap {
  if (kind === 'plain') return plainFeatures(shape);
  return kind === 'fastfood' ? fastfoodFeatures(shape) : orthogonalFeatures(shape);
}

/**
 * A map of S·H·G·Π·H·B blocks: random signs B, a permutation Π, normal G, lengths S.
 *
 * shapes  as FeatureShape
 * units   of the width
 * throws  RangeError for a shape no map can have
 * source  Le, Sarlós and Smola, Fastfood: Approximating Kernel Expansions in Loglinear Time (2013), equation 8; lengths
 *         drawn as those of normal vectors
 * cost    two transforms a block; five kept numbers a frequency
 */
export function fastfoodFeatures(shape: FeatureShape): FeatureMap {
  return blocked(shape, (random, n) => {
    const signs = drawSigns(random, n);
    const order = shuffled(random, n);
    const normal = Float32Array.from({ length: n }, () => random.normal());
    let square = 0;
    for (const g of normal) square += g * g;
    // A row of H G Π H B has length √n · |G|.
    const lengths = Float32Array.from({ length: n }, () => normalLength(random, n) / Math.sqrt(n * square));
    const moved = new Float32Array(n);
    return {
      lengths,
      bytes: 16 * n,
      turn(workspace) {
        const { numbers, bits } = workspace;
        flipSigns(bits, signs, 0, n);
        workspace.hadamard();
        for (let k = 0; k < n; k++) moved[k] = numbers[order[k]] * normal[k];
        numbers.set(moved);
        workspace.hadamard();
      },
    };
  });
}

/**
 * A map of blocks of orthogonal frequencies: three rounds of random signs and a transform.
 *
 * shapes  as FeatureShape
 * units   of the width
 * throws  RangeError for a shape no map can have
 * source  Yu, Suresh, Choromanski, Holtmann-Rice and Kumar, Orthogonal Random Features (2016), section 4 (structured); with
 *         each frequency's length drawn as that of a normal vector, as in their unstructured form, so that the kernel is the
 *         Gaussian one in few dimensions too
 * cost    three transforms a block; four kept numbers a frequency
 */
export function orthogonalFeatures(shape: FeatureShape): FeatureMap {
  return blocked(shape, (random, n) => {
    const signs = drawSigns(random, ROUNDS * n);
    // Each transform lengthens by √n.
    const lengths = Float32Array.from({ length: n }, () => normalLength(random, n) / n ** (ROUNDS / 2));
    return {
      lengths,
      bytes: 4 * ROUNDS * n,
      turn(workspace) {
        for (let round = 0; round < ROUNDS; round++) {
          flipSigns(workspace.bits, signs, round * n, n);
          workspace.hadamard();
        }
      },
    };
  });
}

interface Block {
  /** (n) what each row is multiplied with to be one frequency of a kernel of width 1. */
  readonly lengths: Float32Array;
  readonly bytes: number;
  /** Turns the padded inputs, in place. */
  turn(workspace: Workspace): void;
}

function blocked(shape: FeatureShape, draw: (random: Random, n: number) => Block): FeatureMap {
  checkShape(shape);
  const { inputs, outputs, width } = shape;
  const n = Math.max(LEAST_BLOCK, powerOfTwo(inputs));
  const pairs = outputs / 2;
  const blocks = Array.from({ length: Math.ceil(pairs / n) }, (_, b) => draw(openRandom(shape.seed, b), n));
  for (const { lengths } of blocks) for (let k = 0; k < n; k++) lengths[k] /= width;
  const workspace = workspaceOf(n);
  const { numbers } = workspace;
  const size = Math.sqrt(1 / pairs);
  const padded = new Float32Array(n);
  return {
    inputs,
    outputs,
    bytes: blocks.reduce((sum, block) => sum + block.bytes + 4 * n, 4 * n + workspaceBytes(n)),
    apply(x, out) {
      for (let k = 0; k < inputs; k++) padded[k] = x[k];
      for (let b = 0, from = 0; from < pairs; b++, from += n) {
        numbers.set(padded);
        const { lengths } = blocks[b];
        blocks[b].turn(workspace);
        for (let k = 0; k < n; k++) numbers[k] *= lengths[k];
        workspace.writeWaves(Math.min(n, pairs - from), size, out, from, pairs);
      }
    },
  };
}
