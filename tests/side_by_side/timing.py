"""Time of a whole fit (estimate, smooth, forecast 12 steps) and of one likelihood with statsmodels.

Usage: python timing.py folder count; prints `file,seconds per fit,seconds per likelihood`.
"""
import csv
import sys
import time
import warnings

import numpy as np
from statsmodels.tsa.statespace.structural import UnobservedComponents

warnings.simplefilter("ignore")
folder, count = sys.argv[1], int(sys.argv[2])
STRUCTURES = {
    "local_level": dict(level="local level"),
    "local_linear": dict(level="local linear trend"),
    "dummy_season": dict(level="local linear trend", seasonal=12),
    "harmonics": dict(level="local linear trend", freq_seasonal=[dict(period=52, harmonics=3)]),
}
for name, structure in STRUCTURES.items():
    with open(f"{folder}/{name}.csv") as file:
        series = [np.array(row, dtype=float) for row in csv.reader(file)][:count]
    begin = time.perf_counter()
    for y in series:
        # The fit's results hold the smoothed states.
        fitted = UnobservedComponents(y, **structure).fit(disp=0)
        fitted.get_forecast(12).predicted_mean
    per_fit = (time.perf_counter() - begin) / len(series)
    begin, times = time.perf_counter(), 50
    for _ in range(times):
        fitted.model.loglike(fitted.params)
    print(f"{name},{per_fit},{(time.perf_counter() - begin) / times}", flush=True)
