/**
 * Random Fourier features with every frequency drawn and kept: the plain way, against which the structured ones are
 * measured, and the faster one where there are few inputs.
 */
import { checkShape, type FeatureMap, type FeatureShape } from './feature-map.ts';
import { openRandom } from './random.ts';
import { writeWaves } from './waves.ts';

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
  const turns = 1 / (2 * Math.PI * width);
  const frequencies = Float32Array.from({ length: pairs * inputs }, () => turns * random.normal());
  const phases = new Float32Array(pairs);
  const size = Math.sqrt(1 / pairs);
  const read = new Float32Array(inputs);
  return {
    inputs,
    outputs,
    bytes: 4 * (frequencies.length + pairs + inputs),
    apply(x, out) {
      for (let k = 0; k < inputs; k++) read[k] = x[k];
      for (let j = 0, at = 0; j < pairs; j++, at += inputs) {
        let sum = 0;
        for (let k = 0; k < inputs; k++) sum += frequencies[at + k] * read[k];
        phases[j] = sum;
      }
      writeWaves(phases, pairs, size, out, 0, pairs);
    },
  };
}
