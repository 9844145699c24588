"""
Structural time series of statsmodels, UnobservedComponents (Harvey, 1989), by signal: level and trend of several forms,
trigonometric seasons where periods are given, with and without an autoregressive part; the form by Akaike's criterion,
fitted by maximum likelihood. One pass of its Kalman filter, gaps and all, gives the state at every origin.

usage: components.py CASE_FOLDER OUT
"""

import sys
import warnings

import numpy as np
from statsmodels.tsa.statespace.structural import UnobservedComponents

from case import Case, write_forecasts

FORMS = [
    {"level": "local level"},
    {"level": "local level", "autoregressive": 2},
    {"level": "local linear trend"},
    {"level": "smooth trend", "autoregressive": 2},
]
HARMONICS = 4


def seasons(periods, ticks):
    fits = [p for p in periods if ticks >= 2 * p]
    return [{"period": p, "harmonics": min(HARMONICS, int(p // 2))} for p in fits]


def fitted(past, season):
    best = None
    for form in FORMS:
        model = UnobservedComponents(past, freq_seasonal=season or None, **form)
        try:
            found = model.fit(disp=False, maxiter=60)
        except (np.linalg.LinAlgError, ValueError):
            continue
        if np.isfinite(found.aic) and (best is None or found.aic < best[0].aic):
            best = (found, form)
    if best is None:
        raise RuntimeError("no form could be fitted")
    return best


def main(folder, out):
    warnings.simplefilter("ignore")
    case = Case(folder)
    ahead = np.empty((len(case.origins), case.targets, case.horizon))
    season = seasons(case.periods, case.fit_ticks)
    for i in range(case.targets):
        y = case.values[:, i]
        past = y[: case.fit_ticks]
        mean, sd = np.nanmean(past), np.nanstd(past)
        found, form = fitted((past - mean) / sd, season)
        whole = UnobservedComponents((y - mean) / sd, freq_seasonal=season or None, **form)
        states = whole.filter(found.params)
        transition = states.filter_results.transition[:, :, 0]
        design = states.filter_results.design[0, :, 0]
        for n, origin in enumerate(case.origins):
            x = states.filter_results.predicted_state[:, origin + 1]
            for h in range(case.horizon):
                ahead[n, i, h] = design @ x * sd + mean
                x = transition @ x
    write_forecasts(out, ahead)


main(*sys.argv[1:])
