"""How fast rolling ckls fits are, against a loop of optimisers.

Run by hand, on an idle machine, with the numerical libraries on one thread:

    OPENBLAS_NUM_THREADS=1 OMP_NUM_THREADS=1 pytest tests/bench/test_bench_ckls.py -m bench -s

The peer is a loop over windows with `scipy.optimize.minimize`: the expansion of second order as a vectorised
log-density by quadrature in the logarithm, started from weighted least squares, variables scaled and decorrelated by
the Cholesky factor of their covariance, L-BFGS-B.
"""

import time

import numpy as np
import pytest
from scipy.optimize import minimize

from driftbook.estimators.models.ckls import MODEL

SERIES, VALUES, LOOKBACK, DT = 10, 2500, 250, 1 / 252
WINDOWS = SERIES * (VALUES - LOOKBACK)
LOOPED = 30
LEAST_RATIO_TO_LOOP = 180
NODES, WEIGHTS = np.polynomial.legendre.leggauss(4)
AT, SHARE = 0.5 * (1 + NODES)[:, None], 0.5 * WEIGHTS[:, None]


def paths(rows, n, seed, *, kappa, theta, sigma, gamma, substeps=10, before=0):
    rng = np.random.default_rng(seed)
    h, x, every = DT / substeps, np.broadcast_to(theta, rows).astype(float), np.empty((rows, n))
    for i in range(-before, n):
        if i >= 0:
            every[:, i] = x
        for _ in range(substeps):
            z, b = np.sqrt(h) * rng.standard_normal(rows), sigma * x**gamma
            x = np.maximum(x + kappa * (theta - x) * h + b * z + 0.5 * b * b * gamma / x * (z * z - h), 1e-6)
    return every


def short_rates():
    """Ten series of different kinds."""
    rng = np.random.default_rng(3)
    kappa, theta, gamma = rng.uniform(2, 8, SERIES), rng.uniform(0.03, 0.08, SERIES), rng.uniform(0.3, 1.2, SERIES)
    sigma = rng.uniform(0.4, 1.0, SERIES) * theta ** (1 - gamma)
    return paths(SERIES, VALUES, 3, kappa=kappa, theta=theta, sigma=sigma, gamma=gamma)


def best(*works, rounds=3):
    """Seconds of one core of the best round of each, taken in turn."""
    seconds = np.empty((rounds, len(works)))
    for taken in seconds:
        for at, work in enumerate(works):
            start = time.process_time()
            work()
            taken[at] = time.process_time() - start
    return seconds.min(axis=0)


def loop_fit(x):
    """One window by a numerical optimiser, as an able user would write it."""
    n, w = len(x) - 1, x[:-1] ** -0.5
    A = np.stack([w, w * x[:-1]], axis=1)
    drift = np.linalg.lstsq(A, w * np.diff(x) / DT, rcond=None)[0]
    sigma = np.std(w * np.diff(x) - A @ drift * DT) / np.sqrt(DT)
    L = np.zeros((4, 4))
    L[:2, :2] = np.linalg.cholesky(np.linalg.inv(A.T @ A)) * sigma / np.sqrt(DT)
    L[2, 2], L[3, 3] = 1 / np.sqrt(2 * n), 1 / (np.sqrt(2 * n) * np.std(np.log(x)))
    L[2, 3] = -L[3, 3] * np.log(x).mean()
    start = np.r_[drift, np.log(sigma), 0.5]
    before, moved = np.log(x[:-1]), np.log(x[1:] / x[:-1])
    logs = before + AT * moved
    t, last, total = np.exp(logs), np.log(x[1:]).sum(), moved.sum()
    inverse = 1 / t

    def minus_loglik(q):
        a, b, log_sigma, g = start + L @ q
        u, e, k = np.exp(2 * log_sigma), 1 - g, 0.5 * g - 0.25 * g * g
        E = np.exp(-g * logs)
        density = SHARE * E * t
        whole = density.sum(axis=0)
        h, density = moved * whole, density / whole
        way = AT * (
            1 + 0.5 * e * moved * (AT - 1) * (1 + e * moved * (2 * AT - 1) / 6)
        )  # of the way in eta, l being small
        f, first = a + b * t, E * E
        V = inverse * inverse / first
        near = f * f * first / u - 2 * g * a * inverse + u * k * V
        curved = (
            a * a * (-2 * g) * (-g - 1) * inverse * inverse
            - 2 * a * b * (1 - 2 * g) * g * inverse
            + b * b * (2 - 2 * g) * e
            + 2 * g * a * u * (g - 2) * V * inverse
            + u * u * k * 2 * e * 3 * e * V * V
        )
        value = -0.5 * n * np.log(2 * np.pi * DT * u) - g * (last + 0.5 * total) - (h @ h) / (2 * u * DT)
        value += np.sum(moved * (SHARE * t * first * f).sum(axis=0)) / u
        value -= 0.5 * DT * (np.sum(density * near) + n * b * (1 - 2 * g))
        return -(value - 0.25 * DT * DT * np.sum(way * (1 - way) * density * curved))

    return -minimize(minus_loglik, np.zeros(4), method="L-BFGS-B").fun


@pytest.mark.bench
@pytest.mark.parametrize("intervals", [False, True])
def test_against_a_loop_of_optimisers(intervals):
    series = short_rates()
    fit = MODEL.rolling(series, DT, LOOKBACK, intervals=intervals)
    rng = np.random.default_rng(1)
    sample = [tuple(place) for place in rng.choice(np.argwhere(np.isfinite(fit.kappa)), LOOPED, replace=False)]
    windows = [series[row, k : k + LOOKBACK + 1] for row, k in sample]
    found = []
    in_loop, ours = best(
        lambda: found.append([loop_fit(window) for window in windows]),
        lambda: MODEL.rolling(series, DT, LOOKBACK, intervals=intervals),
        rounds=2,
    )
    ratio = (in_loop / LOOPED) / (ours / WINDOWS)
    over = np.array([fit.loglik[place] for place in sample]) - np.array(found[0])
    print(f"\nintervals={intervals}: {ours / WINDOWS * 1e6:.2f} µs a window, loop {in_loop / LOOPED * 1e3:.2f} ms")
    print(f"{ratio:,.0f} times; log-likelihood, ours over the loop's: {over.min():.1e} to {over.max():.1e}")
    assert over.min() > -1e-6
    assert ratio >= LEAST_RATIO_TO_LOOP
