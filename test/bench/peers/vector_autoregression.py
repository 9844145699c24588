"""
Vector autoregression of statsmodels by least squares on a long history (Lütkepohl, 2005, section 3.2). Gaps are bridged by lines.

usage: vector_autoregression.py ROWS.npy LAGS COEFFICIENTS_OUT.npy
"""

import sys

import numpy as np
from statsmodels.tsa.api import VAR


def main(file, lags, out):
    rows = np.load(file)
    ticks = np.arange(len(rows))
    for y in rows.T:
        gone = np.isnan(y)
        if gone.any():
            y[gone] = np.interp(ticks[gone], ticks[~gone], y[~gone])
    fitted = VAR(rows).fit(int(lags), trend="c")
    np.save(out, fitted.params)


main(*sys.argv[1:])
