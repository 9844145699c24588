/**
 * Random Fourier features with every frequency drawn and kept: the plain way, against which the structured ones are
 * measured, and the faster one where there are few inputs.
 */
import { checkShape, type FeatureMap, type FeatureShape } from './feature-map.ts';
import { openRandom } from './random.ts';
import { workspaceBytes, workspaceOf } from './workspace.ts';

/** Frequencies worked on together. */
const RUN = 1024;

/**
 * A map whose frequencies are independent normal draws.
 *
 * shapes  as FeatureShape
 * units   of the width
 * throws  RangeError for a shape no map can have
 * source  Rahimi and Recht, Random Features for Large-Scale Kernel Machines (2007), algorithm 1, with a cosine and a sine
 *         for each frequency instead of a random offset (Sutherland and Schneider 2015: less variance at equal count)
 * cost    inputs × outputs / 2 products and as many kept numbers
 */
export function plainFeatures(shape: FeatureShape): FeatureMap {
  checkShape(shape);
  const { inputs, outputs, width } = shape;
  const pairs = outputs / 2;
  const random = openRandom(shape.seed);
  const frequencies = Float32Array.from({ length: pairs * inputs }, () => random.normal() / width);
  const workspace = workspaceOf(RUN);
  const { numbers } = workspace;
  const size = Math.sqrt(1 / pairs);
  const read = new Float32Array(inputs);
  return {
    inputs,
    outputs,
    bytes: 4 * (frequencies.length + inputs) + workspaceBytes(RUN),
    apply(x, out) {
      for (let k = 0; k < inputs; k++) read[k] = x[k];
      for (let from = 0; from < pairs; from += RUN) {
        const count = Math.min(RUN, pairs - from);
        for (let j = 0; j < count; j++) {
          const at = (from + j) * inputs;
          let sum = 0;
          for (let k = 0; k < inputs; k++) sum += frequencies[at + k] * read[k];
          numbers[j] = sum;
        }
        workspace.writeWaves(count, size, out, from, pairs);
      }
    },
  };
}
