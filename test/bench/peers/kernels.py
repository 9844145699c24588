"""
The kernels' work by NumPy and SciPy, each case named on standard input, one a line; for each a line with the name, the least
seconds of processor time of a run, and who did it. Where two libraries do the same, the quicker counts.

usage: kernels.py < CASES
"""

import sys
import time

import numpy as np
import scipy.fft
import scipy.linalg

LEAST_SECONDS = 0.02
REPEATS = 5
rng = np.random.default_rng(1)


def least(work):
    """Least seconds of a run, over runs long enough for the clock."""
    work()
    times = 1
    while True:
        start = time.process_time()
        for _ in range(times):
            work()
        if time.process_time() - start >= LEAST_SECONDS:
            break
        times *= 2
    best = float("inf")
    for _ in range(REPEATS):
        start = time.process_time()
        for _ in range(times):
            work()
        best = min(best, (time.process_time() - start) / times)
    return best


def uniform(*shape):
    return 2 * rng.random(shape) - 1


def positive(n):
    a = uniform(n, n)
    return a.T @ a + n * np.eye(n)


def gram(rows, columns):
    a = uniform(rows, columns)
    return [("NumPy A.T @ A", lambda: a.T @ a)]


def product(rows, m, n):
    a, b = uniform(rows, m), uniform(rows, n)
    return [("NumPy A.T @ B", lambda: a.T @ b)]


def mixed(rows, m, n):
    a, b = uniform(rows, m).astype(np.float32), uniform(rows, n)
    return [("NumPy A.astype(float).T @ B", lambda: a.astype(float).T @ b)]


def multiply(m, k, n):
    a, b = uniform(m, k), uniform(k, n)
    return [("NumPy A @ B", lambda: a @ b)]


def cholesky(n):
    a = positive(n)
    return [("SciPy cholesky", lambda: scipy.linalg.cholesky(a, lower=True, check_finite=False))]


def solve(n, m):
    l, b = scipy.linalg.cholesky(positive(n), lower=True), uniform(n, m)
    return [("SciPy solve_triangular", lambda: scipy.linalg.solve_triangular(l, b, lower=True, check_finite=False))]


def qr(rows, n):
    a = uniform(rows, n)
    return [("NumPy qr", lambda: np.linalg.qr(a))]


def fft(n):
    z = uniform(n) + 1j * uniform(n)
    return [("NumPy fft", lambda: np.fft.fft(z)), ("SciPy fft", lambda: scipy.fft.fft(z))]


def rfft(n):
    x = uniform(n)
    return [("NumPy rfft", lambda: np.fft.rfft(x)), ("SciPy rfft", lambda: scipy.fft.rfft(x))]


def spectra(n):
    a, b, c = (uniform(n) + 1j * uniform(n) for _ in range(3))

    def add():
        c[:] += a.conj() * b

    return [("NumPy c += conj(a) b", add)]


def hadamard(n):
    h, x = scipy.linalg.hadamard(n).astype(float), uniform(n)
    return [("SciPy hadamard(n) @ x", lambda: h @ x)]


def cos(n):
    x = (30 * uniform(n)).astype(np.float32)
    return [("NumPy cos", lambda: np.cos(x))]


WORK = (gram, product, mixed, multiply, cholesky, solve, qr, fft, rfft, spectra, hadamard, cos)
BY_NAME = {work.__name__: work for work in WORK}

for line in sys.stdin:
    name, *sizes = line.split()
    timed = [(least(work), who) for who, work in BY_NAME[name](*map(int, sizes))]
    seconds, who = min(timed)
    print(line.strip(), seconds, who, sep="\t", flush=True)
