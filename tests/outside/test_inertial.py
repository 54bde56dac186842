"""The damped oscillator against a generic Kalman filter with matrix exponentials, and printed covariances."""

import numpy as np
import pytest
from scipy.linalg import expm
from statsmodels.tsa.statespace.mlemodel import MLEModel

from driftbook.estimators import MODELS, Status
from driftbook.estimators.jets import variables
from driftbook.estimators.oscillator import motion

MODEL = MODELS["inertial"]
SAME_DENSITY = 1e-9  # one likelihood by two filters
PRINTED = 1e-12  # values of Chandrasekhar's formulas in 15 digits
SIGMAS = 3.5  # of simulation error


def law(damping, omega, dt):
    """Transition matrix and noise covariance over a step for eta = 1 (Van Loan, C. F. (1978), IEEE Trans. AC-23)."""
    block = np.zeros((4, 4))
    block[:2, :2], block[:2, 2:], block[3, 2], block[2, 3], block[3, 3] = (
        [[0, -1], [omega**2, damping]],
        [[0, 0], [0, 1]],
        1.0,
        -(omega**2),
        -damping,
    )
    grown = expm(block * dt)
    return grown[2:, 2:].T, grown[2:, 2:].T @ grown[:2, 2:]


def by_statsmodels(x, steps, damping, omega, theta, eta):
    """log p(x_1 … x_n | x_0) with V_0 in its stationary law, by a time-varying filter of two states."""
    laws = [law(damping, omega, dt) for dt in steps]
    model = MLEModel(x[1:] - theta, k_states=2)
    model["design", 0, 0], model["selection"] = 1.0, np.eye(2)
    model["transition"] = np.stack([A for A, _ in laws[1:]] + [np.eye(2)], axis=-1)
    model["state_cov"] = np.stack([eta**2 * Q for _, Q in laws[1:]] + [np.zeros((2, 2))], axis=-1)
    A, Q = laws[0]
    spread = A @ np.diag([0.0, eta**2 / (2 * damping)]) @ A.T + eta**2 * Q
    model.ssm.initialize_known(A @ [x[0] - theta, 0.0], spread)
    return model.ssm.loglike()


def swings(damping, omega, n, paths, seed):
    """Positions in the stationary law with sigma_s = 0.3 and theta = 3, at 252 steps a year."""
    rng, eta, (A, Q) = np.random.default_rng(seed), 0.3 * damping, law(damping, omega, 1 / 252)
    state = rng.standard_normal((paths, 2)) * [eta / (np.sqrt(2 * damping) * omega), eta / np.sqrt(2 * damping)]
    root = eta * np.linalg.cholesky(Q)
    x = np.empty((paths, n + 1))
    x[:, 0] = state[:, 0]
    for k in range(n):
        state = state @ A.T + rng.standard_normal((paths, 2)) @ root.T
        x[:, k + 1] = state[:, 0]
    return 3 + x


@pytest.mark.parametrize(("damping", "omega"), [(250.0, 54.8), (60.0, 30.0), (20.0, 40.0), (900.0, 20.0)])
@pytest.mark.parametrize("equal", [True, False])
def test_likelihood_is_that_of_a_generic_filter(damping, omega, equal):
    n = 200
    steps = np.full(n, 1 / 252) if equal else np.random.default_rng(1).choice([1.0, 2.0, 3.0, 4.0], n) / 365
    x = swings(100.0, 30.0, n, 1, 2)[0]
    expected = by_statsmodels(x, steps, damping, omega, 2.9, 60.0)
    assert MODEL.loglik(x, steps, damping, omega, 2.9, 60.0) == pytest.approx(expected, abs=SAME_DENSITY)


@pytest.mark.parametrize("equal", [True, False])
def test_reported_likelihood_is_that_of_a_generic_filter(equal):
    n, dt = 120, 1 / 252
    steps = np.full(n, dt) if equal else np.random.default_rng(3).choice([1.0, 3.0, 4.0], n) / 365
    windows = swings(100.0, 30.0, n, 20, 4)
    fit = MODEL.fit(windows, dt if equal else np.broadcast_to(steps, (20, n)))
    checked = 0
    for x, damping, omega, theta, eta, loglik, status in zip(
        windows, fit.damping, fit.omega, fit.theta, fit.eta, fit.loglik, fit.status, strict=True
    ):
        if status == Status.OK and damping * steps.max() < 8:  # beyond, their matrix exponentials lose digits
            checked += 1
            assert loglik == pytest.approx(by_statsmodels(x, steps, damping, omega, theta, eta), abs=SAME_DENSITY)
    assert checked >= 10


def step_of(damping, stiffness, t):
    return motion(*variables(np.array([damping * t]), np.array([stiffness * t * t])))


@pytest.mark.parametrize(
    ("damping", "at_half", "at_one"),
    [
        (1.0, 0.151763712291759, -0.017661137729866),
        (5.0, 0.19089894630116, 0.121100177149753),
        (100.0, 0.245145843229805, 0.240289706435774),
    ],
)
def test_autocovariance_is_chandrasekhars(damping, at_half, at_one):
    """Chandrasekhar (1943), Reviews of Modern Physics 15, with Var V = 1 and omega² = 4, so that Var X = 1/4.

    In the stationary law X_0 and V_0 are independent, so the covariance over t is a11(t) Var X.
    """
    for t, printed in ((0.5, at_half), (1.0, at_one)):
        assert 0.25 * step_of(damping, 4.0, t).a11[0, 0] == pytest.approx(printed, rel=PRINTED, abs=1e-15)


@pytest.mark.parametrize(
    ("t", "printed"),
    [(0.001, 9.996667500438566e-7), (0.01, 9.966749833599e-5), (1.0, 0.7357588823428847), (100.0, 198.0)],
)
def test_a_free_particle_spreads_as_ornstein_found(t, printed):
    """E ΔX² = 2 (t − 1 + e^{−t}) for damping 1 and Var V = 1: ballistic first, diffusive later."""
    step = step_of(1.0, 0.0, t)
    spread = 2 * t**3 * step.q11[0, 0] + t * t * step.a12[0, 0] ** 2
    assert spread == pytest.approx(printed, rel=PRINTED)


@pytest.mark.parametrize(("damping", "rate"), [(5.0, 1.0), (100.0, 0.0400160128128144)])
def test_the_slow_rate_is_not_yet_that_of_the_limit(damping, rate):
    """(g − √(g² − 4 w))/2, where the limit says w/g: 0.8 and 0.04. After a long step only it is left."""
    early, late = (step_of(damping, 4.0, t).a11[0, 0] for t in (10.0, 11.0))
    assert -np.log(late / early) == pytest.approx(rate, rel=1e-9)


# damping and omega a year, and which intervals are held to their 95 %; n = 250 steps of a year.
COVERAGE = {
    (250.0, 54.8): ("damping", "eta", "omega", "kappa_s", "sigma_s", "theta"),
    (1000.0, 110.0): ("damping", "eta", "omega", "kappa_s", "sigma_s", "theta"),
    (100.0, 14.0): ("damping", "eta", "omega", "kappa_s", "sigma_s", "theta"),
    (60.0, 30.0): ("damping", "eta", "omega", "kappa_s", "sigma_s", "theta"),
    (20.0, 40.0): ("damping", "eta", "omega", "kappa_s", "sigma_s", "theta"),
}


@pytest.mark.parametrize(("damping", "omega"), COVERAGE)
def test_intervals_hold_the_truth(damping, omega):
    paths = 600
    fit = MODEL.fit(swings(damping, omega, 250, paths, 7), 1 / 252)
    known = (fit.status == Status.OK) | (fit.status == Status.NO_REVERSION)
    assert known.mean() > 0.98
    truths = {"damping": damping, "omega": omega, "theta": 3.0, "eta": 0.3 * damping}
    truths |= {"kappa_s": omega**2 / damping, "sigma_s": 0.3}
    shares = {}
    for name in COVERAGE[damping, omega]:
        lower, upper = (fit.columns[f"{name}_{end}"][known] for end in ("lower", "upper"))
        at_least = -np.inf if name == "theta" else 0.0
        inside = (np.nan_to_num(lower, nan=at_least) <= truths[name]) & (
            truths[name] <= np.nan_to_num(upper, nan=np.inf)
        )
        shares[name] = float(inside.mean())
    for name, share in shares.items():
        assert share >= 0.93 - SIGMAS * np.sqrt(0.95 * 0.05 / paths), (name, share)
