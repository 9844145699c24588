"""Reads a case as peers.ts lays it out, and writes forecasts as peers.ts reads them; see there for the files."""

import os

import numpy as np


class Case:
    def __init__(self, folder):
        def path(name):
            return os.path.join(folder, name)

        with open(path("case.csv"), encoding="ascii") as lines:
            facts = dict(line.strip().split(",", 1) for line in lines)
        self.values = np.genfromtxt(path("values.csv"), delimiter=",", skip_header=1, ndmin=2)
        self.origins = np.loadtxt(path("origins.csv"), dtype=int, ndmin=1)
        self.fit_ticks = int(facts["fit_ticks"])
        self.learn_ticks = int(facts["learn_ticks"])
        self.horizon = int(facts["horizon"])
        self.targets = int(facts["targets"])
        self.periods = [float(p) for p in facts["periods"].split(",") if p]

    def filled(self):
        """Gaps closed by the last reading, so that no origin sees what came after it."""
        out = self.values.copy()
        for y in out.T:
            start = y[np.isfinite(y)][0]
            for t in range(len(y)):
                if not np.isfinite(y[t]):
                    y[t] = start
                start = y[t]
        return out


def write_forecasts(file, forecasts):
    """forecasts (origins, targets, horizon); one line an origin and target."""
    flat = forecasts.reshape(-1, forecasts.shape[2])
    np.savetxt(file, flat, delimiter=",", fmt="%.10g")
