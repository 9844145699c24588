/**
 * The linear filter as one writes it first: arrays of arrays, nested loops, fresh arrays every tick, every path issued
 * kept in a list. The same arithmetic, up to the order of sums; here only to be timed beside ours.
 */
import type { LinearModel } from '@stillwell/runtime/filter';

interface Memory {
  z: number;
  means: number[];
  resonators: [number, number][];
}

const product = (matrix: readonly number[][], vector: readonly number[]): number[] =>
  matrix.map((line) => line.reduce((sum, weight, k) => sum + weight * vector[k]!, 0));

const rowsOf = (values: Float64Array, cols: number): number[][] =>
  Array.from({ length: values.length / cols }, (_, r) => Array.from(values.subarray(r * cols, (r + 1) * cols)));

const between = (low: number, value: number, high: number): number => Math.min(high, Math.max(low, value));

/** See the file head. */
export class PlainFilter {
  readonly #model: LinearModel;
  readonly #bottleneck: number[][];
  readonly #readout: number[][];
  readonly #basis: number[][];
  readonly #radius: number[][];
  #channels: Memory[];
  #paths: number[][][] = [];
  #next: number[];

  constructor(model: LinearModel) {
    this.#model = model;
    this.#bottleneck = rowsOf(model.bottleneck, model.channelCount * model.featureCount);
    this.#readout = rowsOf(model.readout, model.order);
    this.#basis = rowsOf(model.horizonBasis, model.basisCount);
    this.#radius = rowsOf(model.radius, model.horizon);
    this.#channels = Array.from({ length: model.channelCount }, () => ({
      z: 0,
      means: Array.from(model.decays, () => 0),
      resonators: Array.from(model.resonatorRe, (): [number, number] => [0, 0]),
    }));
    this.#next = this.#channels.map(() => 0);
  }

  /** Folds a tick in; gives median, lower and upper of every signal in its unit. */
  tick(readings: Float64Array): { median: number[]; lower: number[]; upper: number[] }[] {
    const model = this.#model;
    const given = Array.from(readings, (y, c) => (y - model.mean[c]!) / model.scale[c]!);
    const folded = given.map((z, c) => (Number.isNaN(z) ? this.#next[c]! : z));
    this.#score(given);
    this.#channels = this.#channels.map((memory, c) => this.#advanced(memory, folded[c]!));
    const features = this.#channels.flatMap((memory) => this.#features(memory));
    const coefficients = product(this.#readout, product(this.#bottleneck, features));
    const r = model.basisCount;
    const paths = folded.map((z, i) =>
      product(this.#basis, coefficients.slice(i * r, (i + 1) * r)).map((move) => z + move),
    );
    this.#next = paths.map((path) => path[0]!);
    this.#paths = [paths, ...this.#paths].slice(0, model.horizon);
    return paths.map((path, i) => this.#bounded(path, i));
  }

  #bounded(path: readonly number[], i: number): { median: number[]; lower: number[]; upper: number[] } {
    const { mean, scale, clipLow, clipHigh } = this.#model;
    const units = (z: number): number => between(clipLow[i]!, mean[i]! + scale[i]! * z, clipHigh[i]!);
    return {
      median: path.map(units),
      lower: path.map((z, h) => units(z - this.#radius[i]![h]!)),
      upper: path.map((z, h) => units(z + this.#radius[i]![h]!)),
    };
  }

  #score(given: readonly number[]): void {
    const { boundsRate, coverage } = this.#model;
    this.#paths.forEach((paths, h) => {
      given.forEach((z, i) => {
        if (Number.isNaN(z)) return;
        const q = this.#radius[i]![h]!;
        const isOutside = Math.abs(z - paths[i]![h]!) > q;
        this.#radius[i]![h] = q + boundsRate * q * (isOutside ? coverage : coverage - 1);
      });
    });
  }

  #advanced(memory: Memory, z: number): Memory {
    const { decays, resonatorRe, resonatorIm } = this.#model;
    return {
      z,
      means: memory.means.map((e, k) => decays[k]! * e + (1 - decays[k]!) * z),
      resonators: memory.resonators.map(([re, im], k) => {
        const [a, b] = [resonatorRe[k]!, resonatorIm[k]!];
        return [a * re - b * im + (1 - Math.sqrt(a * a + b * b)) * z, a * im + b * re];
      }),
    };
  }

  #features(memory: Memory): number[] {
    const { resonatorRe, resonatorIm } = this.#model;
    const means = memory.means.map((e) => between(-12, e - memory.z, 12));
    const rest = memory.resonators.flatMap(([re, im], k) => {
      const [a, b] = [resonatorRe[k]!, resonatorIm[k]!];
      const gain = 1 - Math.sqrt(a * a + b * b);
      const size = (1 - a) * (1 - a) + b * b;
      return [re - (gain * (1 - a) * memory.z) / size, im - (gain * b * memory.z) / size];
    });
    return [...means, ...rest.map((feature) => between(-12, feature, 12))];
  }
}
