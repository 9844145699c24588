/** Products two rows at a time against the textbook's triple loop, to the bit, for odd and even numbers of rows. */
import { describe, expect, test } from 'vitest';
import { addLowerGram } from '../../../trainer/linalg/gram.ts';
import { addTransposed, multiply, multiplyTransposed, transpose } from '../../../trainer/linalg/products.ts';
import { seededNumbers } from '../../support/models.ts';

const random = seededNumbers(3);
const numbers = (count: number): Float64Array => Float64Array.from({ length: count }, () => random() - 0.5);

function slowly(a: Float64Array, b: Float64Array, n: number, k: number, m: number, start: Float64Array): Float64Array {
  const out = start.slice();
  for (let i = 0; i < n; i++) {
    for (let j = 0; j < m; j++) for (let l = 0; l < k; l++) out[i * m + j]! += a[i * k + l]! * b[l * m + j]!;
  }
  return out;
}

describe.each([
  [1, 1, 1],
  [2, 4, 3],
  [3, 5, 7],
  [6, 9, 2],
  [7, 11, 5],
])('%d × %d times %d columns', (n, k, m) => {
  const [a, b, start] = [numbers(n * k), numbers(k * m), numbers(n * m)];
  const zeros = new Float64Array(n * m);

  test('multiply and multiplyTransposed', () => {
    expect(multiply(a, b, n, k, m)).toEqual(slowly(a, b, n, k, m, zeros));
    expect(multiplyTransposed(transpose(a, n, k), b, n, k, m)).toEqual(slowly(a, b, n, k, m, zeros));
  });

  test('added to what is there, longer factors cut off', () => {
    const out = start.slice();
    addTransposed(out, transpose(a, n, k), Float64Array.of(...b, 1, 2), n, k, m);
    expect(out).toEqual(slowly(a, b, n, k, m, start));
  });
});

test.each([1, 2, 5, 6])('the lower triangle of a Gram matrix of %d columns', (D) => {
  const rows = numbers(7 * D);
  const gram = new Float64Array(D * D);
  addLowerGram(gram, Float64Array.of(...rows, ...new Float64Array(D)), 7, D);
  for (let a = 0; a < D; a++) {
    for (let b = 0; b < D; b++) {
      let sum = 0;
      for (let k = 0; k < 7; k++) sum += rows[k * D + a]! * rows[k * D + b]!;
      expect(gram[a * D + b]).toBeCloseTo(b <= a ? sum : 0, 12);
    }
  }
});
