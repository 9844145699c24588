"""
The bank's features of a long history, their products and one ridge for all signals and steps, as one would write it with
NumPy and SciPy: recursions by lfilter, products by the BLAS (all threads), 50,000 rows at a time so that memory stays bounded.
Gaps are bridged by lines. One penalty is given; nothing is chosen, judged or written down but the map.

usage: bank_ridge.py ROWS.npy BANK.json MAP_OUT.npy
bank   decays, resonators ([re, im]), lags, horizon, penalty (on features and targets of unit variance, by row)
"""

import json
import sys

import numpy as np
from scipy.linalg import cho_factor, cho_solve
from scipy.signal import lfilter

CHUNK = 50_000


def standardised(file):
    """(signals, ticks), gaps bridged."""
    rows = np.load(file)
    values = np.ascontiguousarray(rows.T)
    ticks = np.arange(values.shape[1])
    for y in values:
        gone = np.isnan(y)
        if gone.any():
            y[gone] = np.interp(ticks[gone], ticks[~gone], y[~gone])
    values -= values.mean(axis=1, keepdims=True)
    values /= values.std(axis=1, keepdims=True)
    return values


class Bank:
    """Every feature is a recursion on the changes of a signal, but for the level and the lags."""

    def __init__(self, bank, signals):
        self.poles = [complex(a, 0) for a in bank["decays"]] + [complex(*a) for a in bank["resonators"]]
        self.lags = bank["lags"]
        self.signals = signals
        self.per_signal = sum(1 if a.imag == 0 else 2 for a in self.poles) + 1 + len(self.lags)
        self.memories = [np.zeros((signals, 1), float if a.imag == 0 else complex) for a in self.poles]

    def fill(self, out, values, first, end):
        """out (signals, features of one, ticks) of ticks first..end: each feature's ticks side by side, as lfilter writes them."""
        now = values[:, first:end]
        change = np.diff(values[:, max(first - 1, 0) : end], axis=1, prepend=values[:, :1] if first == 0 else np.empty((self.signals, 0)))
        f = 0
        for k, a in enumerate(self.poles):
            gain = (1 - abs(a)) / (1 - a)
            if a.imag == 0:
                made, self.memories[k] = lfilter([(-a * gain).real], [1, -a.real], change, zi=self.memories[k])
                out[:, f] = made
                f += 1
            else:
                made, self.memories[k] = lfilter([-a * gain], [1, -a], change, zi=self.memories[k])
                out[:, f] = made.real
                out[:, f + 1] = made.imag
                f += 2
        out[:, f] = -now
        for k, lag in enumerate(self.lags):
            out[:, f + 1 + k] = values[:, first - lag : end - lag] - now if first >= lag else 0


def main(rows, bank_file, out):
    with open(bank_file, encoding="ascii") as file:
        given = json.load(file)
    values = standardised(rows)
    signals, ticks = values.shape
    horizon = given["horizon"]
    bank = Bank(given, signals)
    p = signals * bank.per_signal
    gram, cross = np.zeros((p, p)), np.zeros((p, signals * horizon))
    features, future = np.empty((signals, bank.per_signal, CHUNK)), np.empty((signals, horizon, CHUNK))
    used = 0
    for first in range(0, ticks - horizon, CHUNK):
        end = min(first + CHUNK, ticks - horizon)
        a, f = features[:, :, : end - first], future[:, :, : end - first]
        bank.fill(a, values, first, end)
        for h in range(1, horizon + 1):
            np.subtract(values[:, first + h : end + h], values[:, first:end], out=f[:, h - 1])
        if first == 0:
            continue
        a, f = a.reshape(p, -1), f.reshape(signals * horizon, -1)
        gram += a @ a.T
        cross += a @ f.T
        used += end - first
    gram /= used
    gram[np.diag_indices(p)] += given["penalty"] / used
    np.save(out, cho_solve(cho_factor(gram), cross / used))


main(*sys.argv[1:])
