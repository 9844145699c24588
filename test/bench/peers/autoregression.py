"""
Vector autoregression of statsmodels (Lütkepohl, 2005), one equation a column, order by Akaike's criterion; for a single
column its AutoReg, the same model. Periods given are offered as orders too.

usage: autoregression.py CASE_FOLDER OUT
"""

import sys
import warnings

import numpy as np
from statsmodels.tsa.api import VAR, AutoReg

from case import Case, write_forecasts

ORDERS = [1, 2, 3, 4, 6, 8, 12, 16, 24, 36, 48]


def fitted(past, orders):
    """Intercept, and one matrix a lag, of the order with the least criterion over the same rows."""
    most = max(orders)
    best = None
    for order in orders:
        held = past[most - order :]
        if past.shape[1] == 1:
            found = AutoReg(held[:, 0], lags=order, old_names=False).fit()
            entry = (found.aic, found.params[:1], found.params[1:].reshape(-1, 1, 1))
        else:
            found = VAR(held).fit(order)
            entry = (found.aic, found.intercept, found.coefs)
        if best is None or entry[0] < best[0]:
            best = entry
    return best[1], best[2]


def main(folder, out):
    warnings.simplefilter("ignore")
    case = Case(folder)
    values = case.filled()
    past = values[: case.fit_ticks]
    width = past.shape[1]
    room = case.fit_ticks // (4 * width)
    seasons = [int(round(p)) + extra for p in case.periods for extra in (0, 1)]
    orders = sorted(order for order in {*ORDERS, *seasons} if order <= room)
    mean, sd = past.mean(axis=0), past.std(axis=0)
    intercept, lags = fitted((past - mean) / sd, orders or [1])
    ahead = np.empty((len(case.origins), case.targets, case.horizon))
    for n, origin in enumerate(case.origins):
        known = list((values[: origin + 1] - mean) / sd)
        for h in range(case.horizon):
            step = intercept + sum(lag @ known[-1 - k] for k, lag in enumerate(lags))
            known.append(step)
            ahead[n, :, h] = (step * sd + mean)[: case.targets]
    write_forecasts(out, ahead)


main(*sys.argv[1:])
