"""How fast rolling square-root fits are, against a loop of optimisers.

Run by hand, on an idle machine, with the numerical libraries on one thread:

    OPENBLAS_NUM_THREADS=1 OMP_NUM_THREADS=1 pytest tests/bench/test_bench_cir.py -m bench -s

Both sides are measured in CPU time in one process, in turn. The peer is a loop over windows with
`scipy.optimize.minimize`: vectorised log-density with scipy's scaled Bessel function in the form that does not cancel,
started from weighted least squares, variables scaled and decorrelated by the Cholesky factor of the start's covariance,
L-BFGS-B with alpha bounded below.
"""

import time

import numpy as np
import pytest
from scipy.optimize import minimize
from scipy.special import ive

from driftbook.estimators import Status
from driftbook.estimators.models.cir import MODEL as CIR

pytestmark = pytest.mark.bench

SERIES, VALUES, LOOKBACK, DT = 10, 2500, 250, 1 / 252
LEAST_RATIO = {"far from zero": 1000, "near zero": 30}  # measured with intervals, on a busy machine: 965–1,020, 120–129
LOOPED = 40


def paths(name):
    """Daily series: ratios from 8 to 80, or from 0.2 to 2 with one transition in six near zero."""
    rng = np.random.default_rng(1 if name == "far from zero" else 2)
    m = SERIES
    if name == "far from zero":
        kappa, theta, sigma = rng.uniform(2, 8, m), rng.uniform(0.03, 0.08, m), rng.uniform(0.08, 0.25, m)
    else:
        kappa, theta, sigma = rng.uniform(0.5, 2, m), rng.uniform(0.02, 0.04, m), rng.uniform(0.2, 0.3, m)
    c = 2 * kappa / (sigma**2 * -np.expm1(-kappa * DT))
    x = np.empty((m, VALUES))
    x[:, 0] = theta
    for i in range(VALUES - 1):
        x[:, i + 1] = rng.noncentral_chisquare(4 * kappa * theta / sigma**2, 2 * c * np.exp(-kappa * DT) * x[:, i])
        x[:, i + 1] /= 2 * c
    return np.maximum(x, 1e-10)


def loop_fit(window):
    """One window by L-BFGS-B; the log-likelihood found."""
    x, y = window[:-1], window[1:]
    d, n = y - x, x.size
    a, b, log_growth, root = np.sqrt(x), np.sqrt(y), np.log(y / x).sum(), np.sqrt(x * y)
    weight = 1 / (x + 0.1 * x.mean())
    design = np.stack([np.ones(n), -x], axis=1) * DT
    normal = (design * weight[:, None]).T @ design
    start = np.linalg.solve(normal, (design * weight[:, None]).T @ d)
    e = d - design @ start
    variance = (weight * e * e).sum() / (weight * x).sum() / DT
    lower = np.zeros((3, 3))
    lower[:2, :2] = np.linalg.cholesky(np.linalg.inv(normal) * variance * (weight * x).mean() * DT)
    lower[2, 2] = 1 / np.sqrt(2 * n)
    origin = np.array([max(start[0], 1e-3), start[1], 0.5 * np.log(variance)])

    def minus_loglik(u):
        alpha, kappa, log_sigma = origin + lower @ u
        variance, pull = np.exp(2 * log_sigma), kappa * DT
        if alpha <= 0:
            return 1e10
        c = 2 / (variance * DT) * (pull / -np.expm1(-pull) if abs(pull) > 1e-10 else 1.0)
        r, q = np.exp(-0.5 * pull), 2 * alpha / variance - 1
        with np.errstate(all="ignore"):
            value = n * np.log(c) - c * ((b - r * a) ** 2).sum() + 0.5 * q * (log_growth + n * pull)
            value += np.log(ive(q, 2 * c * r * root)).sum()
        return -value if np.isfinite(value) else 1e10

    return -minimize(minus_loglik, np.zeros(3), method="L-BFGS-B").fun


def cpu(work, rounds):
    """CPU seconds of the best of some rounds."""
    best = np.inf
    for _ in range(rounds):
        start = time.process_time()
        work()
        best = min(best, time.process_time() - start)
    return best


@pytest.mark.parametrize("intervals", [False, True])
@pytest.mark.parametrize("name", LEAST_RATIO)
def test_against_a_loop_of_optimisers(name, intervals):
    x = paths(name)
    fit = CIR.rolling(x, DT, LOOKBACK, intervals=intervals)
    rng = np.random.default_rng(3)
    usable = np.argwhere(fit.status == Status.OK)
    sample = usable[rng.choice(len(usable), LOOPED, replace=False)]
    windows = [x[row, k : k + LOOKBACK + 1] for row, k in sample]
    found = []
    ours = cpu(lambda: CIR.rolling(x, DT, LOOKBACK, intervals=intervals), 3) / fit.status.size
    theirs = cpu(lambda: found.append([loop_fit(window) for window in windows]), 2) / LOOPED
    ours = min(ours, cpu(lambda: CIR.rolling(x, DT, LOOKBACK, intervals=intervals), 2) / fit.status.size)
    gain = np.array([fit.loglik[row, k] for row, k in sample]) - np.array(found[0])
    print(f"\n{name}, intervals={intervals}: {ours * 1e6:.2f} µs a window; loop {theirs * 1e3:.2f} ms", end="; ")
    print(f"{theirs / ours:,.0f} times; log-likelihood over the loop's: {gain.min():.1e} to {gain.max():.1e}")
    assert gain.min() > -1e-6
    assert theirs / ours >= LEAST_RATIO[name]


@pytest.mark.parametrize("lookback", [60, 250, 1000])
def test_time_hardly_grows_with_the_lookback(lookback):
    x = paths("far from zero")
    seconds = cpu(lambda: CIR.rolling(x, DT, lookback), 3)
    print(f"\nlookback {lookback}: {seconds / (SERIES * (VALUES - lookback)) * 1e6:.2f} µs a window")
