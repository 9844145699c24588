"""Brand's update of a truncated singular value decomposition (Linear Algebra and its Applications 415, 2006, equations 2-4),
in NumPy. Words: file of rows (float64), columns, rank, rows a block, repeats. Prints microseconds a row, the least of the
repeats, and the singular values after the first pass. Turned the two ways a user might write it, the quicker one counts."""

import sys
import time

import numpy as np


def whole(state, block):
    """The basis turned at every block, as the paper's equations stand."""
    basis, s = state
    rank = len(s)
    p = basis.T @ block
    left, r = np.linalg.qr(block - basis @ p)
    b = block.shape[1]
    k = np.zeros((rank + b, rank + b))
    k[:rank, :rank] = np.diag(s)
    k[:rank, rank:] = p
    k[rank:, rank:] = r
    u, s, _ = np.linalg.svd(k)
    return np.hstack((basis, left)) @ u[:, :rank], s[:rank]


def one(state, block):
    """One row: what is left of it is a vector, and only its length is wanted."""
    basis, s = state
    rank = len(s)
    row = block[:, 0]
    p = basis.T @ row
    left = row - basis @ p
    length = np.sqrt(left @ left)
    k = np.zeros((rank + 1, rank + 1))
    k[range(rank), range(rank)] = s
    k[:rank, rank] = p
    k[rank, rank] = length
    u, s, _ = np.linalg.svd(k)
    turned = basis @ u[:rank, :rank]
    turned += np.multiply.outer(left / length, u[rank, :rank])
    return turned, s[:rank]


def main():
    path, columns, rank, block, repeats = sys.argv[1], *map(int, sys.argv[2:6])
    rows = np.fromfile(path).reshape(-1, columns)
    blocks = [np.asfortranarray(rows[i : i + block].T) for i in range(rank, len(rows), block)]
    start, s, _ = np.linalg.svd(rows[:rank].T, full_matrices=False)
    least = np.inf
    values = None
    for update in (whole, one) if block == 1 else (whole,):
        for _ in range(repeats):
            state = (start, s)
            began = time.perf_counter()
            for part in blocks:
                state = update(state, part)
            least = min(least, (time.perf_counter() - began) / (len(rows) - rank))
            values = state[1] if values is None else values
    print(least * 1e6, *values)


main()
