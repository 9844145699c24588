"""Lagged products of the changes of a record, or second moments of a bank's features, as one would write them with NumPy and
SciPy. Words: file of rows (float64, ticks x channels), channels, then
  lags REACH            by real Fourier transforms, block after block, spectra added up and turned back once
  features POLES.json   every feature by its recursion (lfilter), products by the BLAS, 50,000 ticks at a time
Prints seconds without reading the file, then numbers to compare: products of channels 0 and 1 at lags 0, 1, 10 and the reach; or
the first four products of features."""

import json
import sys
import time

import numpy as np
from scipy.fft import irfft, rfft
from scipy.signal import lfilter


def lagged(changes, reach):
    """(channels, channels, reach + 1): sum of x_i(t + k) x_j(t)."""
    channels, ticks = changes.shape
    size = 1 << int(np.ceil(np.log2(2 * reach)))
    block = size - reach
    sums = np.zeros((channels, channels, size // 2 + 1), complex)
    padded = np.concatenate((np.zeros((channels, reach)), changes, np.zeros((channels, block))), axis=1)
    newest = np.zeros((channels, size))
    for first in range(0, ticks, block):
        window = padded[:, first : first + size]
        newest[:, reach:] = window[:, reach:]
        x = rfft(newest, axis=1, workers=2)
        w = np.conj(rfft(window, axis=1, workers=2))
        for i in range(channels):
            sums[i] += x[i] * w
    return irfft(sums, axis=2, workers=2)[:, :, : reach + 1]


def features(changes, poles):
    """Products of all features, and of features with the next change."""
    channels, ticks = changes.shape
    memories = [[None] * len(poles) for _ in range(channels)]
    width = sum(1 if im == 0 else 2 for _, im in poles) * channels
    total = np.zeros((width + channels, width + channels))
    for first in range(0, ticks, 50_000):
        part = changes[:, first : first + 50_000]
        rows = np.empty((width + channels, part.shape[1]))
        at = 0
        for c in range(channels):
            for m, (re, im) in enumerate(poles):
                a = complex(re, im) if im else re
                drive = -a * (1 - abs(a)) / (1 - a)
                if memories[c][m] is None:
                    memories[c][m] = np.zeros(1, complex if im else float)
                made, memories[c][m] = lfilter([drive], [1, -a], part[c], zi=memories[c][m])
                rows[at] = made.real
                at += 1
                if im:
                    rows[at] = made.imag
                    at += 1
        rows[width:, :-1] = part[:, 1:]
        rows[width:, -1] = changes[:, first + part.shape[1]] if first + part.shape[1] < ticks else 0
        total += rows @ rows.T
    return total


file, channels, kind, word = sys.argv[1:5]
values = np.fromfile(file).reshape(-1, int(channels)).T
began = time.perf_counter()
changes = np.diff(values, axis=1)
if kind == "lags":
    found = lagged(changes, int(word))
    took = time.perf_counter() - began
    checks = [found[0, 1, k] for k in (0, 1, 10, int(word))]
else:
    with open(word) as text:
        found = features(changes, json.load(text))
    took = time.perf_counter() - began
    checks = list(found[0, :4])
print(took, *checks)
