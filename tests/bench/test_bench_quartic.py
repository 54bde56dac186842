"""How fast rolling quartic fits are, against a loop of optimisers.

Run by hand, on an idle machine, with the numerical libraries on one thread:

    OPENBLAS_NUM_THREADS=1 OMP_NUM_THREADS=1 pytest tests/bench/test_bench_quartic.py -m bench -s

The peer is a loop over windows with `scipy.optimize.minimize`: the same likelihood as a vectorised log-density, started
from least squares, variables scaled and decorrelated by the Cholesky factor of their covariance, L-BFGS-B.
"""

import time

import numpy as np
import pytest
from scipy.optimize import minimize

from driftbook.estimators import Status
from driftbook.estimators.models.quartic import MODEL

SERIES, VALUES, LOOKBACK, DT = 10, 2500, 250, 1 / 252
WINDOWS = SERIES * (VALUES - LOOKBACK)
LOOPED = 40
LEAST_RATIO_TO_LOOP = 700
NODES, WEIGHTS = np.polynomial.legendre.leggauss(4)


def wells(rows, n, seed, strength=8.0, sigma=1.5, substeps=20):
    rng = np.random.default_rng(seed)
    x, h = rng.choice([-1.0, 1.0], rows), DT / substeps
    every = np.empty((rows, n))
    for i in range(n):
        every[:, i] = x
        for _ in range(substeps):
            x = x + strength * (x - x**3) * h + sigma * np.sqrt(h) * rng.standard_normal(rows)
    return every


def best(*works, rounds=3):
    """Seconds of one core of the best round of each, taken in turn."""
    seconds = np.empty((rounds, len(works)))
    for taken in seconds:
        for at, work in enumerate(works):
            start = time.process_time()
            work()
            taken[at] = time.process_time() - start
    return seconds.min(axis=0)


def loop_fit(window):
    """One window by a numerical optimiser, as an able user would write it."""
    scale = window.std()
    z = (window - window.mean()) / scale
    x, d = z[:-1], np.diff(z)
    powers = np.vander(x, 4, increasing=True)
    a = np.linalg.lstsq(powers, d / DT, rcond=None)[0]
    sigma = np.std(d - powers @ a * DT) / np.sqrt(DT)
    L = np.zeros((5, 5))
    L[:4, :4] = np.linalg.cholesky(np.linalg.inv(powers.T @ powers)) * sigma / np.sqrt(DT)
    L[4, 4] = 1 / np.sqrt(2 * len(d))
    start = np.r_[a, np.log(sigma)]
    t = x + np.outer(0.5 * (1 + NODES), d)
    share, bridge = 0.5 * WEIGHTS, WEIGHTS * (1 - NODES**2) / 8 * (DT * DT / 4)

    def minus_loglik(q):
        a0, a1, a2, a3, log_sigma = start + L @ q
        u = np.exp(2 * log_sigma)
        f = a0 + t * (a1 + t * (a2 + t * a3))
        f1 = a1 + t * (2 * a2 + 3 * a3 * t)
        near = share @ (0.5 * DT * ((d / DT - f) ** 2 / u + f1)).sum(axis=1)
        curved = bridge @ (2 * (f1 * f1 + f * (2 * a2 + 6 * a3 * t)) + 6 * u * a3).sum(axis=1)
        return 0.5 * len(d) * np.log(2 * np.pi * u * DT) + near + curved

    return -minimize(minus_loglik, np.zeros(5), method="L-BFGS-B").fun - len(d) * np.log(scale)


@pytest.mark.bench
@pytest.mark.parametrize("intervals", [False, True])
def test_against_a_loop_of_optimisers(intervals):
    series = wells(SERIES, VALUES, 0)
    fit = MODEL.rolling(series, DT, LOOKBACK, intervals=intervals)
    rng = np.random.default_rng(1)
    places = np.argwhere(np.isin(fit.status, [Status.OK, Status.AT_BOUND]))
    sample = [tuple(place) for place in rng.choice(places, LOOPED, replace=False)]
    windows = [series[row, k : k + LOOKBACK + 1] for row, k in sample]
    found = []
    in_loop, ours = best(
        lambda: found.append([loop_fit(window) for window in windows]),
        lambda: MODEL.rolling(series, DT, LOOKBACK, intervals=intervals),
    )
    ratio = (in_loop / LOOPED) / (ours / WINDOWS)
    over = np.array([fit.loglik[place] for place in sample]) - np.array(found[0])
    print(f"\nintervals={intervals}: {ours / WINDOWS * 1e6:.2f} µs a window, loop {in_loop / LOOPED * 1e3:.2f} ms")
    print(f"{ratio:,.0f} times; log-likelihood, ours over the loop's: {over.min():.1e} to {over.max():.1e}")
    assert over.min() > -1e-6
    assert ratio >= LEAST_RATIO_TO_LOOP
