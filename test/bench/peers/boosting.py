"""
Gradient boosting of scikit-learn, HistGradientBoostingRegressor with its defaults, as a direct forecast: one model a signal
and step, on the last readings of every column and the phase of each period given. It learns the change from the last reading,
which follows a trend that the values themselves cannot (trees do not extrapolate).

usage: boosting.py CASE_FOLDER OUT
"""

import sys

import numpy as np
from sklearn.ensemble import HistGradientBoostingRegressor

from case import Case, write_forecasts

LAGS = [*range(1, 13), 16, 20, 24]


def features(values, at, lags, periods):
    now = values[at]
    back = [now - values[np.maximum(at - lag, 0)] for lag in lags]
    phase = [np.mod(at, period)[:, None] for period in periods]
    return np.hstack([now, *back, *phase])


def main(folder, out):
    case = Case(folder)
    values = case.filled()
    around = [int(round(p)) + extra for p in case.periods for extra in (-1, 0, 1)]
    ahead_of = [int(round(p)) - case.horizon for p in case.periods]
    lags = sorted({lag for lag in [*LAGS, *around, *ahead_of] if 0 < lag <= case.fit_ticks // 3})
    reach = max(lags)
    rows = np.arange(reach, case.fit_ticks - 1)
    known = features(values, rows, lags, case.periods)
    asked = features(values, case.origins, lags, case.periods)
    ahead = np.empty((len(case.origins), case.targets, case.horizon))
    for i in range(case.targets):
        last = values[:, i]
        for h in range(1, case.horizon + 1):
            there = rows[rows + h < case.fit_ticks]
            change = case.values[there + h, i] - last[there]
            seen = np.isfinite(change)
            model = HistGradientBoostingRegressor(random_state=1)
            model.fit(known[: len(there)][seen], change[seen])
            ahead[:, i, h - 1] = last[case.origins] + model.predict(asked)
    write_forecasts(out, ahead)


main(*sys.argv[1:])
