/**
 * Stein equations by modes against GNU Octave 7.3.0 with its control package 3.4.0 (both of Debian 12): `dlyap (A, W)` for
 * X = A X A' + W and `dlyap (A, B, W)` for X = A X B + W, which call SLICOT's SB03MD and SB04QD. To compute again:
 * pkg load control; A = [.6 .3 -.1; -.2 .7 .25; .1 -.3 .5]; W = [2 .5 .1; .5 1 -.3; .1 -.3 3]; dlyap (A, W)
 * B = [.5 -.6; .6 .5]; V = [1 2; -1 .5; .3 .7]; dlyap (A, B, V)
 */
import { describe, expect, it } from 'vitest';
import { solveStein } from '../../../trainer/linalg/lyapunov.ts';
import { modalForm } from '../../../trainer/linalg/modal.ts';
import { applyModes, type Modes, spectralRadius, stepModes, transposeModes } from '../../../trainer/linalg/modes.ts';
import { multiply, transpose } from '../../../trainer/linalg/products.ts';
import { solveGeneral } from '../../../trainer/linalg/solve.ts';

const a = Float64Array.of(0.6, 0.3, -0.1, -0.2, 0.7, 0.25, 0.1, -0.3, 0.5);
const identity = Float64Array.of(1, 0, 0, 0, 1, 0, 0, 0, 1);
const found = modalForm(a, identity, 3, 3)!;
/** (3 × 3) T with A T = T · modes: the drive of the identity is T⁻¹. */
const basis = solveGeneral(found.drive, identity, 3, 3)!;

const b: Modes = {
  size: 2,
  first: Int32Array.of(0),
  isComplex: Uint8Array.of(1),
  re: Float64Array.of(0.5),
  im: Float64Array.of(0.6),
};
const closeTo = (got: Float64Array, expected: readonly number[], digits: number): void => {
  expect(got.length).toBe(expected.length);
  got.forEach((value, k) => {
    expect(value).toBeCloseTo(expected[k]!, digits);
  });
};

describe('solveStein', () => {
  it("gives Octave's X = A X A' + W", () => {
    const w = Float64Array.of(2, 0.5, 0.1, 0.5, 1, -0.3, 0.1, -0.3, 3);
    const inModes = multiply(multiply(found.drive, w, 3, 3, 3), transpose(found.drive, 3, 3), 3, 3, 3);
    const x = multiply(
      multiply(basis, solveStein(found.modes, found.modes, inModes), 3, 3, 3),
      transpose(basis, 3, 3),
      3,
      3,
      3,
    );
    closeTo(
      x,
      [
        3.92696962387586, 0.554676759632325, -0.329923943453946, 0.554676759632325, 2.34851147321692,
        -0.315028910784082, -0.329923943453946, -0.315028910784082, 4.3718285361869,
      ],
      11,
    );
  });

  it('gives X = A X B + W, a pair on one side and a mixture on the other', () => {
    const v = Float64Array.of(1, 2, -1, 0.5, 0.3, 0.7);
    const x = multiply(basis, solveStein(found.modes, transposeModes(b), multiply(found.drive, v, 3, 3, 2)), 3, 3, 2);
    closeTo(
      x,
      [2.65308028740843, 2.19384496254464, -1.21683865590123, 1.56594118453786, 0.624799098100459, 0.0121940876129152],
      11,
    );
  });
});

describe('modalForm', () => {
  it("reproduces the matrix: A T is T times the modes', complex ones first", () => {
    expect(Array.from(found.modes.isComplex)).toEqual([1, 0]);
    const moved = multiply(a, basis, 3, 3, 3);
    const byModes = transpose(applyModes(transposeModes(found.modes), transpose(basis, 3, 3), 3), 3, 3);
    closeTo(moved, Array.from(byModes), 12);
  });

  it('runs as the matrix runs', () => {
    const s = found.drive.slice(0, 9).filter((_, k) => k % 3 === 0);
    let x = Float64Array.of(1, 0, 0);
    for (let t = 0; t < 20; t++) {
      stepModes(found.modes, s);
      x = multiply(a, x, 3, 3, 1) as Float64Array<ArrayBuffer>;
    }
    closeTo(multiply(basis, s, 3, 3, 1), Array.from(x), 12);
  });

  it('has the spectral radius that the characteristic polynomial gives', () => {
    // det(A - λ) at a root is zero: for the real pole, and for the pair by its squared modulus times the real one.
    const real = found.modes.re[1]!;
    const pair = found.modes.re[0]! ** 2 + found.modes.im[0]! ** 2;
    const determinant = 0.6 * (0.35 + 0.075) - 0.3 * (-0.1 - 0.025) - 0.1 * (0.06 - 0.07);
    expect(real * pair).toBeCloseTo(determinant, 12);
    expect(2 * found.modes.re[0]! + real).toBeCloseTo(1.8, 12);
    expect(spectralRadius(found.modes)).toBeCloseTo(Math.max(Math.sqrt(pair), Math.abs(real)), 12);
  });

  it('has none where poles coincide, or an entry is not finite', () => {
    expect(modalForm(Float64Array.of(0.5, 1, 0, 0.5), Float64Array.of(0, 1), 2, 1)).toBeNull();
    expect(modalForm(Float64Array.of(0.5, Number.NaN, 0, 0.5), Float64Array.of(0, 1), 2, 1)).toBeNull();
  });
});
