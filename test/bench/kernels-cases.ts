/** What is timed of the kernels: each on seeded numbers, with the operations it is counted for (LAPACK's and FFTW's counts). */
import type { Kernels } from '@stillwell/trainer';

/** One kernel at one size. `peer` is its name in peers/kernels.py; null: none there. */
export interface KernelCase {
  readonly name: string;
  readonly operations: number;
  readonly peer: string | null;
  /** Lays out the arrays and gives what is timed. */
  readonly prepare: (kernels: Kernels) => () => void;
}

type Numbers = Float64Array | Float32Array;

function fill<T extends Numbers>(array: T): T {
  let state = 12_345;
  for (let i = 0; i < array.length; i++) {
    state = (Math.imul(state, 1_103_515_245) + 12_345) & 0x7fffffff;
    array[i] = state / 2 ** 30 - 1;
  }
  return array;
}

function gram(rows: number, columns: number): KernelCase {
  return {
    name: `gram ${rows} x ${columns}`,
    operations: rows * columns * columns,
    peer: `gram ${rows} ${columns}`,
    prepare: (k) => {
      const a = fill(k.alloc64(rows * columns));
      const c = k.alloc64(columns * columns);
      return () => k.gramAdd(c, a, rows, columns);
    },
  };
}

function product(rows: number, m: number, n: number, isSingle = false): KernelCase {
  return {
    name: `product A'B ${rows} x ${m}, ${n}${isSingle ? ', A float32' : ''}`,
    operations: 2 * rows * m * n,
    peer: `${isSingle ? 'mixed' : 'product'} ${rows} ${m} ${n}`,
    prepare: (k) => {
      const a = fill(isSingle ? k.alloc32(rows * m) : k.alloc64(rows * m));
      const b = fill(k.alloc64(rows * n));
      const c = k.alloc64(m * n);
      return () => k.productAdd(c, a, b, rows, m, n);
    },
  };
}

function multiply(m: number, inner: number, n: number): KernelCase {
  return {
    name: `product AB ${m} x ${inner} x ${n}`,
    operations: 2 * m * inner * n,
    peer: `multiply ${m} ${inner} ${n}`,
    prepare: (k) => {
      const a = fill(k.alloc64(m * inner));
      const b = fill(k.alloc64(inner * n));
      const c = k.alloc64(m * n);
      return () => k.multiply(c, a, b, m, inner, n);
    },
  };
}

function positive(k: Kernels, n: number): Float64Array {
  const a = fill(k.alloc64(n * n));
  const g = k.alloc64(n * n);
  k.gramAdd(g, a, n, n);
  for (let i = 0; i < n; i++) g[i * n + i]! += n;
  return g;
}

function cholesky(n: number): KernelCase {
  return {
    name: `cholesky ${n}`,
    operations: n ** 3 / 3,
    peer: `cholesky ${n}`,
    prepare: (k) => {
      const a = positive(k, n);
      const l = k.alloc64(n * n);
      return () => {
        l.set(a);
        if (k.cholesky(l, n) >= 0) throw new Error('The matrix is not positive definite.');
      };
    },
  };
}

function solve(n: number, m: number): KernelCase {
  return {
    name: `triangular solve ${n}, ${m} right sides`,
    operations: n * n * m,
    peer: `solve ${n} ${m}`,
    prepare: (k) => {
      const l = positive(k, n);
      k.cholesky(l, n);
      const b = fill(k.alloc64(n * m));
      const x = k.alloc64(n * m);
      return () => {
        x.set(b);
        k.solveLower(l, x, n, m);
      };
    },
  };
}

function qr(rows: number, n: number, isDependent = false): KernelCase {
  return {
    name: `QR ${rows} x ${n}${isDependent ? ', dependent columns' : ''}`,
    operations: 4 * rows * n * n,
    peer: `qr ${rows} ${n}`,
    prepare: (k) => {
      const a = fill(k.alloc64(rows * n));
      if (isDependent) for (let i = 0; i < rows; i++) a[i * n + n - 1] = a[i * n]!;
      const q = k.alloc64(rows * n);
      const r = k.alloc64(n * n);
      return () => {
        q.set(a);
        k.qr(q, rows, n, r);
      };
    },
  };
}

function transform(n: number): KernelCase {
  return {
    name: `FFT ${n}`,
    operations: 5 * n * Math.log2(n),
    peer: `fft ${n}`,
    prepare: (k) => {
      const [a, b, re, im] = [fill(k.alloc64(n)), fill(k.alloc64(n)), k.alloc64(n), k.alloc64(n)];
      return () => {
        re.set(a);
        im.set(b);
        k.fft(re, im, n);
      };
    },
  };
}

function realTransform(n: number): KernelCase {
  return {
    name: `real FFT ${n}`,
    operations: 2.5 * n * Math.log2(n),
    peer: `rfft ${n}`,
    prepare: (k) => {
      const [x, re, im] = [fill(k.alloc64(n)), k.alloc64(n / 2 + 1), k.alloc64(n / 2 + 1)];
      return () => k.realFft(x, re, im, n);
    },
  };
}

function spectra(n: number): KernelCase {
  return {
    name: `spectra added ${n}`,
    operations: 8 * n,
    peer: `spectra ${n}`,
    prepare: (k) => {
      const [cr, ci, ar, ai, br, bi] = Array.from({ length: 6 }, () => fill(k.alloc64(n))) as Float64Array[];
      return () => k.spectraAdd(cr!, ci!, ar!, ai!, br!, bi!, n);
    },
  };
}

function hadamard(n: number, isSingle: boolean, peer: string | null): KernelCase {
  return {
    name: `Hadamard ${n}, float${isSingle ? 32 : 64}`,
    operations: n * Math.log2(n),
    peer,
    prepare: (k) => {
      const a = fill(isSingle ? k.alloc32(n) : k.alloc64(n));
      const x = isSingle ? k.alloc32(n) : k.alloc64(n);
      return () => {
        x.set(a);
        if (x instanceof Float32Array) k.hadamard32(x, n);
        else k.hadamard64(x, n);
      };
    },
  };
}

function cosines(n: number): KernelCase {
  return {
    name: `cosines ${n}, float32`,
    operations: n,
    peer: `cos ${n}`,
    prepare: (k) => {
      const a = fill(k.alloc32(n)).map((value) => 30 * value);
      const x = k.alloc32(n);
      return () => {
        x.set(a);
        k.cosines32(x, n, 1);
      };
    },
  };
}

/** Counted as one operation each, so their rate is of values, not of arithmetic. */
export const COUNTED_BY_VALUE: readonly string[] = ['cosines'];

/** All that is timed; together they take about a minute. */
export const KERNEL_CASES: readonly KernelCase[] = [
  gram(16_384, 72),
  gram(4096, 512),
  product(100_000, 10, 10),
  product(100_000, 32, 32),
  product(100_000, 32, 32, true),
  product(2000, 32, 1),
  multiply(1000, 1000, 1000),
  multiply(100_000, 32, 32),
  multiply(2000, 32, 1),
  cholesky(72),
  cholesky(512),
  cholesky(2000),
  solve(512, 8),
  solve(512, 512),
  qr(100_000, 10),
  qr(100_000, 32),
  qr(100_000, 64),
  qr(100_000, 32, true),
  transform(4096),
  transform(65_536),
  realTransform(4096),
  realTransform(65_536),
  realTransform(262_144),
  spectra(16_385),
  hadamard(256, false, 'hadamard 256'),
  hadamard(131_072, false, null),
  hadamard(131_072, true, null),
  cosines(131_072),
];
