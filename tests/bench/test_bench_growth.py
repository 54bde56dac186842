"""How the time of rolling fits grows with the number of series and with the lookback, for every model.

Run by hand, on an idle machine, with the numerical libraries on one thread:

    OPENBLAS_NUM_THREADS=1 OMP_NUM_THREADS=1 pytest tests/bench/test_bench_growth.py -m bench -s -n 0

Processor time of one core a window, intervals included, of prices with a pull (a half-life of 17 days). The better of
two runs; the first one of all only brings tables and code into memory.
"""

import time

import numpy as np
import pytest
from study_paths import DAY, pulled

from driftbook.estimators import MODELS

pytestmark = pytest.mark.bench

SERIES, LOOKBACKS = (10, 100, 1000), (60, 250, 1000, 2500)
WINDOWS = 100  # of each series, where series are counted
BY_SUMS = ("abm", "gbm", "ou", "exp_ou")
MOST_WITH_SERIES = 1.5  # times as long a window with 1000 series as with 10
MOST_WITH_LOOKBACK = 3.0  # times as long a window of 2500 steps as one of 60, where sums stand for a window


def prices(series, values):
    rng = np.random.default_rng(series)
    return 40 * np.exp(pulled(rng, rng.standard_normal((series, values - 1)), DAY, 10.0, 0.0, 0.3))


def microseconds(name, series, values, lookback):
    x, best = prices(series, values), np.inf
    for _ in range(2):
        start = time.process_time()
        fit = MODELS[name].rolling(x, DAY, lookback)
        best = min(best, time.process_time() - start)
    return best / fit.status.size * 1e6


@pytest.mark.parametrize("name", MODELS)
def test_time_is_in_proportion_to_the_number_of_windows(name):
    microseconds(name, 1, 300, 250)
    found = [microseconds(name, series, 250 + WINDOWS, 250) for series in SERIES]
    print(f"\n| {name} | " + " | ".join(f"{each:.1f}" for each in found) + " |")
    assert found[-1] < MOST_WITH_SERIES * found[0]


@pytest.mark.parametrize("name", MODELS)
def test_time_grows_little_with_the_lookback(name):
    found = [microseconds(name, 10, 2 * max(lookback, 1250), lookback) for lookback in LOOKBACKS]
    print(f"\n| {name} | " + " | ".join(f"{each:.1f}" for each in found) + " |")
    if name in BY_SUMS:
        assert found[-1] < MOST_WITH_LOOKBACK * found[0]
