"""
Gradient boosting of scikit-learn, HistGradientBoostingRegressor with 300 rounds and its other defaults, as a direct forecast
of the first column at two steps: one model a step, on the readings of every column at 22 lags up to two hours and the time of
day. Prints one line a step: boosting's and the last value's root mean square error over the judged ticks.

usage: wet_well.py VALUES TICKS COLUMNS LEARN_TICKS FROM_TICK STEP...
       VALUES: float64, little-endian, a column after the other
"""

import sys

import numpy as np
from sklearn.ensemble import HistGradientBoostingRegressor

LAGS = [*range(11), 12, 15, 20, 25, 30, 40, 50, 60, 75, 90, 105, 120]
DAY = 1440


def main(path, ticks, columns, learn, start, *steps):
    ticks, columns, learn, start = int(ticks), int(columns), int(learn), int(start)
    values = np.fromfile(path, "<f8").reshape(columns, ticks)
    back = []
    for column in values:
        for lag in LAGS:
            shifted = np.full(ticks, np.nan)
            shifted[lag:] = column[: ticks - lag]
            back.append(shifted)
    angle = 2 * np.pi * np.arange(ticks) / DAY
    known = np.stack([*back, np.sin(angle), np.cos(angle)], 1)
    level = values[0]
    for step in map(int, steps):
        origins = np.arange(max(LAGS), learn - step)
        asked = np.arange(start - 1, ticks - step)
        model = HistGradientBoostingRegressor(max_iter=300, random_state=0)
        model.fit(known[origins], level[origins + step])
        miss = model.predict(known[asked]) - level[asked + step]
        held = level[asked] - level[asked + step]
        print(step, np.sqrt(np.mean(miss**2)), np.sqrt(np.mean(held**2)))


main(*sys.argv[1:])
