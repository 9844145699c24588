/**
 * Where maps work: numbers in the kernels' memory, which transforms and cosines need. One for each length in a process, shared
 * by all maps, since none leaves anything behind between two calls and a memory is costly to make.
 */
import { createKernels } from '../kernels/kernels.ts';

/** Work on up to n numbers. */
export interface Workspace {
  /** (n) */
  readonly numbers: Float32Array;
  /** The same numbers, seen as their bits. */
  readonly bits: Int32Array;
  /** Walsh-Hadamard transform of all n numbers in place, natural order, unnormalised; n a power of two. */
  hadamard(): void;
  /**
   * Takes the first `count` numbers as phases and writes size·cos of them to out[from …], size·sin to out[from + apart …].
   *
   * shapes  count at most n
   * units   phases in radians
   * throws  nothing
   * source  sin x = cos(x − π/2); cosine by trainer/kernels
   * cost    some 3 ns a pair with SIMD; a wave errs by at most 1.3·10⁻⁷ of its size and what the rounding of its phase brings
   *         (6·10⁻⁸ times the phase)
   */
  writeWaves(count: number, size: number, out: Float32Array, from: number, apart: number): void;
}

const QUARTER_TURN = Math.PI / 2;
const made = new Map<number, Workspace>();

/** The workspace of that length. */
export function workspaceOf(n: number): Workspace {
  const known = made.get(n);
  if (known !== undefined) return known;
  const workspace = makeWorkspace(n);
  made.set(n, workspace);
  return workspace;
}

/** Bytes of a workspace. */
export function workspaceBytes(n: number): number {
  return 8 * n;
}

function makeWorkspace(n: number): Workspace {
  const kernels = createKernels(workspaceBytes(n) + 256);
  const numbers = kernels.alloc32(n);
  const shifted = kernels.alloc32(n);
  return {
    numbers,
    bits: new Int32Array(numbers.buffer, numbers.byteOffset, n),
    hadamard: () => kernels.hadamard32(numbers, n),
    writeWaves(count, size, out, from, apart) {
      for (let k = 0; k < count; k++) shifted[k] = numbers[k] - QUARTER_TURN;
      kernels.cosines32(numbers, count, size);
      kernels.cosines32(shifted, count, size);
      if (count === n) {
        out.set(numbers, from);
        out.set(shifted, from + apart);
        return;
      }
      for (let k = 0; k < count; k++) {
        out[from + k] = numbers[k];
        out[from + apart + k] = shifted[k];
      }
    },
  };
}
