"""How fast rolling fits of processes with hidden states are, against loops over statsmodels' compiled filter.

Run by hand, on an idle machine, with the numerical libraries on one thread:

    OPENBLAS_NUM_THREADS=1 OMP_NUM_THREADS=1 pytest tests/bench/test_bench_hidden.py -m bench -s

10 series of 2500 daily values, lookback 250, processor time of one core, both sides in one run. The peer is a loop
over windows of `scipy.optimize.minimize` (L-BFGS-B), the likelihood from statsmodels' Kalman filter with its arrays
written in place; it starts at the median of all estimates, with variables scaled to a standard error, and stops where
its default tolerances say, some 1e-6 short of the best.
"""

import time

import numpy as np
import pytest
from scipy.optimize import minimize
from statsmodels.tsa.statespace.kalman_filter import KalmanFilter

from driftbook.estimators import MODELS, Status

pytestmark = pytest.mark.bench

SERIES, VALUES, LOOKBACK, DT = 10, 2500, 250, 1 / 252
LOOPED = 12
LEAST_RATIO = {
    ("ou_noise", "equal"): 500,
    ("inertial", "equal"): 120,
    ("ou_noise", "calendar"): 40,
    ("inertial", "calendar"): 20,
}


def calendar(seed):
    rng = np.random.default_rng(seed)
    return rng.choice([1.0, 2.0, 3.0, 4.0], (SERIES, VALUES - 1), p=[0.78, 0.02, 0.19, 0.01]) / 365


def noisy(steps):
    rng, kappa, sigma = np.random.default_rng(0), 10.0, 0.3
    x = np.zeros((SERIES, VALUES))
    for k in range(VALUES - 1):
        b = np.exp(-kappa * steps[:, k])
        x[:, k + 1] = b * x[:, k] + sigma * np.sqrt((1 - b * b) / (2 * kappa)) * rng.standard_normal(SERIES)
    return 3 + x + 0.012 * rng.standard_normal(x.shape)


def law(damping, stiffness, dt):
    """Transition and noise covariance for eta = 1, in scalar arithmetic for damping above critical."""
    rate = np.sqrt(complex(damping * damping / 4 - stiffness))
    a, b = -damping / 2 + rate, -damping / 2 - rate
    ea, eb = np.exp(a * dt), np.exp(b * dt)
    h, dh = ((ea - eb) / (a - b)).real, ((a * ea - b * eb) / (a - b)).real
    q22 = (1 - dh * dh - stiffness * h * h) / (2 * damping)
    q11 = (q22 - 0.5 * damping * h * h - h * dh) / stiffness
    return (dh + damping * h, h, -stiffness * h, dh), (q11, 0.5 * h * h, q22)


def swings(steps):
    rng, damping, stiffness, eta = np.random.default_rng(0), 250.0, 3000.0, 75.0
    laws = {dt: law(damping, stiffness, dt) for dt in np.unique(steps)}
    roots = {dt: np.linalg.cholesky([[q[0], q[1]], [q[1], q[2]]]) for dt, (_, q) in laws.items()}
    state = np.zeros((SERIES, 2))
    x = np.empty((SERIES, VALUES))
    x[:, 0] = 0.0
    for k in range(VALUES - 1):
        for j in range(SERIES):
            dt = steps[j, k]
            A = np.array(laws[dt][0]).reshape(2, 2)
            state[j] = A @ state[j] + eta * roots[dt] @ rng.standard_normal(2)
        x[:, k + 1] = state[:, 0]
    return 3 + x


def noise_filter(y, steps):
    """A function of kappa, theta, ln sigma and ln noise: minus the log-likelihood by the compiled filter."""
    equal, n = np.ptp(steps) == 0, len(steps)
    count = 1 if equal else n
    model = KalmanFilter(1, 1, tolerance=0)
    model.bind(np.asfortranarray(y[None, 1:]))
    model["design"] = np.ones((1, 1, 1))
    model["selection"] = np.ones((1, 1, 1))
    model["transition"] = np.zeros((1, 1, count))
    model["state_cov"] = np.zeros((1, 1, count))
    after = np.append(steps[1:], steps[-1])[:count]

    def minus(z):
        kappa, theta, sigma, noise = z[0], z[1], np.exp(z[2]), np.exp(z[3])
        model["transition", 0, 0, :] = np.exp(-kappa * after)
        model["state_cov", 0, 0, :] = sigma**2 * -np.expm1(-2 * kappa * after) / (2 * kappa)
        model["obs_cov", 0, 0] = noise**2
        model["obs_intercept", 0, 0] = theta
        b = np.exp(-kappa * steps[0])
        first = b * b * noise**2 + sigma**2 * (1 - b * b) / (2 * kappa)
        model.initialize_known(np.array([b * (y[0] - theta)]), np.array([[first]]))
        return -model.loglike()

    return minus


def inertial_filter(x, steps):
    """A function of ln damping, ln kappa_s, theta and ln sigma_s, likewise."""
    equal, n = np.ptp(steps) == 0, len(steps)
    lengths, kinds = np.unique(steps, return_inverse=True)
    model = KalmanFilter(1, 2, tolerance=0)
    model.bind(np.asfortranarray(x[None, 1:]))
    model["design"] = np.array([[1.0, 0.0]])
    model["selection"] = np.eye(2)
    count = 1 if equal else n
    model["transition"] = np.zeros((2, 2, count))
    model["state_cov"] = np.zeros((2, 2, count))
    after = np.append(kinds[1:], kinds[-1])[:count]

    def minus(z):
        damping, theta = np.exp(z[0]), z[2]
        stiffness, eta = damping * np.exp(z[1]), damping * np.exp(z[3])
        laws = [law(damping, stiffness, dt) for dt in lengths]
        A = np.array([each for each, _ in laws]).reshape(-1, 2, 2)
        Q = np.array([[[q[0], q[1]], [q[1], q[2]]] for _, q in laws]) * eta**2
        model["transition"] = np.asfortranarray(A[after].transpose(1, 2, 0))
        model["state_cov"] = np.asfortranarray(Q[after].transpose(1, 2, 0))
        model["obs_intercept", 0, 0] = theta
        first = A[kinds[0]]
        spread = eta**2 / (2 * damping) * np.outer(first[:, 1], first[:, 1]) + Q[kinds[0]]
        model.initialize_known(first @ np.array([x[0] - theta, 0.0]), spread)
        return -model.loglike()

    return minus


CASES = {
    "ou_noise": (noisy, noise_filter, lambda f: (f.kappa, f.theta, np.log(f.sigma), np.log(f.noise))),
    "inertial": (
        swings,
        inertial_filter,
        lambda f: (np.log(f.damping), np.log(f.kappa_s), f.theta, np.log(f.sigma_s)),
    ),
}


@pytest.mark.parametrize("kind", ["equal", "calendar"])
@pytest.mark.parametrize("name", CASES)
def test_against_a_loop_over_a_compiled_filter(name, kind):
    simulate, peer, variables = CASES[name]
    steps = np.full((SERIES, VALUES - 1), DT) if kind == "equal" else calendar(1)
    x, given = simulate(steps), DT if kind == "equal" else steps
    fit, ours = None, np.inf
    for _ in range(3 if kind == "equal" else 2):
        start = time.process_time()
        fit = MODELS[name].rolling(x, given, LOOKBACK)
        ours = min(ours, time.process_time() - start)
    ours /= fit.status.size
    with np.errstate(all="ignore"):
        values = np.array(variables(fit))
    usable = np.argwhere((fit.status == Status.OK) & np.isfinite(values.sum(axis=0)))
    chosen = np.random.default_rng(2).choice(usable, LOOPED, replace=False)
    every = np.array([each[tuple(usable.T)] for each in values])
    centre, scale = np.median(every, axis=1), every.std(axis=1)
    gaps, start = [], time.process_time()
    for row, k in chosen:
        minus = peer(x[row, k : k + LOOKBACK + 1], steps[row, k : k + LOOKBACK])
        found = minimize(lambda z, minus=minus: minus(centre + scale * z), np.zeros(4), method="L-BFGS-B")
        gaps.append(-found.fun - fit.loglik[row, k])
    loop = (time.process_time() - start) / LOOPED
    bare = time.process_time()
    MODELS[name].rolling(x, given, LOOKBACK, intervals=False)
    bare = (time.process_time() - bare) / fit.status.size
    print(
        f"\n{name}, {kind} steps: ours {ours * 1e6:.1f} µs a window ({bare * 1e6:.1f} without intervals), "
        f"loop {loop * 1e3:.1f} ms, ratio {loop / ours:.0f}; theirs less ours {min(gaps):.1e} … {max(gaps):.1e}"
    )
    assert max(gaps) < 1e-6
    assert loop / ours >= LEAST_RATIO[name, kind]


@pytest.mark.parametrize("name", CASES)
def test_time_grows_little_with_the_lookback(name):
    simulate = CASES[name][0]
    x = simulate(np.full((SERIES, VALUES - 1), DT))
    for lookback in (60, 250, 1000):
        start = time.process_time()
        fit = MODELS[name].rolling(x, DT, lookback)
        print(f"\n{name}, lookback {lookback}: {(time.process_time() - start) / fit.status.size * 1e6:.1f} µs a window")
