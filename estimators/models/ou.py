"""The Ornstein–Uhlenbeck process dX = kappa (theta − X) dt + sigma dW, at any steps.

The transition law is x_{i+1} | x_i ~ N(theta + (x_i − theta) b, sigma² (1 − b²)/(2 kappa)) with b = e^{−kappa Δ}. At
equal steps the maximum of the likelihood given x_0 is the AR(1) regression with intercept. With beta = b − 1 its slope
on the level, s² the residual variance over n and s2 the one over n − 2, A the spread of the levels:

    kappa = −ln(1 + beta)/Δ                             theta = mean level − mean increment/beta
    sigma² = (s²/Δ)·2 ln(1 + beta)/(beta (2 + beta))    loglik = −(n/2)(ln(2 π s²) + 1)

These hold on either side of kappa = 0, and lose nothing near it. Standard errors are those of least squares, by the
delta method: of kappa √(s2/A)/(b Δ), of theta √(s2 (1/n + (theta − mean level)²/A))/|beta|, and of ln sigma
√(1/(2n) + ¼ g² (s2/A)/b²) with g = 1/h − 2/(e^{2h} − 1), h = kappa Δ.

Intervals do not come from the standard errors: kappa's is the inversion of the slope's exact law, widened for uneven
variance; theta's is of Fieller's type with critical values of its own; sigma's allows for fat tails; see
`driftbook.estimators.intervals`.

At unequal steps theta and sigma² are weighted least squares given kappa, and the likelihood is maximised over kappa
alone, see `driftbook.estimators.profile`; intervals are those of the regression at equal steps that the window amounts
to, see `driftbook.estimators.unequal`. The search goes up to a kappa Δ of 8 or more over the shortest step: where the
likelihood still rises there, as where a slope b is at most 0, the window is `alternating`.

References
----------
Uhlenbeck, G. E. & Ornstein, L. S. (1930), On the theory of the Brownian motion, Physical Review 36, 823–841.
Vasicek, O. (1977), An equilibrium characterization of the term structure, J. Financial Economics 5, 177–188.
White, H. (1980), A heteroskedasticity-consistent covariance matrix estimator, Econometrica 48, 817–838.
"""

from __future__ import annotations

from functools import partial

import numpy as np
from numpy.typing import NDArray

from driftbook.estimators import half_life, unequal
from driftbook.estimators.batches import Answer, Piece
from driftbook.estimators.half_life import finite, half_lives
from driftbook.estimators.intervals import sigma_interval, theta_set, widened_pull
from driftbook.estimators.model import Column, Model, Parameter, parameter_columns
from driftbook.estimators.regression import Mask, Regression, from_sums, from_windows
from driftbook.estimators.repair import blank, repair
from driftbook.estimators.slope_law import slope_law
from driftbook.estimators.status import Status
from driftbook.estimators.stepping import by_steps
from driftbook.estimators.unequal import Solution, as_regression
from driftbook.estimators.windows import Array

SHORTEST = 5

PARAMETERS = (
    Parameter("kappa", "1/t", "Speed of the pull to theta; the likelihood's estimate, some 4/T too high on average."),
    Parameter("theta", "x", "Level that the series is pulled to."),
    Parameter("sigma", "x/√t", "Volatility of the driving noise."),
)

COLUMNS = (
    *(column for parameter in PARAMETERS for column in parameter_columns(parameter)),
    *half_life.COLUMNS,
    Column(
        "stationary_sd",
        "x",
        "Standard deviation of the stationary law; empty where there is none.",
        "CASE WHEN kappa > 0 THEN sigma / sqrt(2 * kappa) END",
    ),
    Column("kurtosis", "", "Fourth moment of the residuals over the squared second: 3 for a Gaussian."),
    Column("loglik", "", "Log-likelihood of the observations after the first, given the first."),
)

_IN_UNITS_OF_X = tuple(column.name for column in COLUMNS if column.unit.startswith("x"))
_NEED_A_PULL = ("half_life", "half_life_mle", "stationary_sd")
_NO_MEMORY = 1e-9  # a slope b below this cannot be told from none: rounding decides its sign
_CANCELS = 1e-3  # below this pull per step a difference loses digits and its series does not


def fit_equal(piece: Piece) -> Answer:
    """Fit every window of a piece, of equal steps; see `driftbook.estimators.batches`."""
    whole, sound = from_sums(piece)
    one_step = (piece.dt == piece.dt[0, 0]).all()
    dt = piece.dt[:1, 0] if one_step else piece.of_windows(piece.dt)
    columns, status = _estimates(whole.flat(), dt)
    doubtful = np.flatnonzero(~sound)
    if doubtful.size:
        repair(piece, doubtful, partial(_from_windows, piece.intervals), columns, status)
    return Answer(columns, status)


def fit_unequal(piece: Piece) -> Answer:
    """The same for unequal steps."""
    m = int(np.prod(piece.shape))
    columns = {name: np.full(m, np.nan) for name in _names(piece)}
    status, solved = np.zeros(m, dtype=np.int8), np.zeros(m, dtype=np.bool_)
    for places, solution, sound in unequal.from_sums(piece):
        found, became = _of_solution(solution)
        solved[places] = sound & (became != Status.NOT_CONVERGED)
        status[places] = became
        for name, values in columns.items():
            values[places] = found[name]
    doubtful = np.flatnonzero(~solved)
    if doubtful.size:
        repair(piece, doubtful, partial(_from_unequal_windows, piece.intervals), columns, status)
    return Answer(columns, status)


fit_piece = by_steps(fit_equal, fit_unequal)


def _names(piece: Piece) -> list[str]:
    """Names of the columns of a fit."""
    none = np.empty(0)
    degree = none if piece.intervals else None
    return list(_estimates(Regression(piece.lookback, none, none, none, none, none, degree, degree), none)[0])


def _of_solution(solution: Solution) -> tuple[dict[str, Array], NDArray[np.int8]]:
    """Columns and status of windows of unequal steps, shape (m,)."""
    columns, status = _estimates(as_regression(solution), solution.duration / solution.n)
    columns["loglik"] = solution.loglik
    for name in ("theta", "kappa_se", "theta_se", "sigma_se"):  # not by way of a slope that may be all but zero
        if name in columns:
            columns[name] = getattr(solution, name)
    no_level = np.flatnonzero(solution.kappa == 0)
    for name in {"theta", "theta_se"} & columns.keys():
        columns[name][no_level] = np.nan
    status[np.isnan(solution.kappa)] = Status.NOT_CONVERGED
    status[solution.rising] = Status.ALTERNATING
    blank(columns, np.flatnonzero(np.isnan(solution.kappa)))
    return columns, status


def _estimates(regression: Regression, dt: Array) -> tuple[dict[str, Array], NDArray[np.int8]]:
    """Columns and status of sound regressions of shape (m,), for one step or m; all columns if it has degree four."""
    no_pull = np.flatnonzero(regression.slope >= 0)
    columns = _point_estimates(regression, dt, no_pull[regression.slope[no_pull] == 0])
    if regression.robust is not None and regression.fourth is not None:
        columns |= _standard_errors(regression, columns["sigma"], dt)
        columns |= _interval_estimates(regression, regression.robust, regression.fourth, dt)
        columns |= _formulas(columns)
        for name in _NEED_A_PULL:
            columns[name][no_pull] = np.nan
    status = np.zeros(regression.slope.shape, dtype=np.int8)
    status[no_pull] = Status.NO_REVERSION
    alternating = np.flatnonzero((regression.slope <= -1 + _NO_MEMORY) & (regression.log_b is None))
    if alternating.size:
        status[alternating] = Status.ALTERNATING
        blank(columns, alternating)
    return columns, status


def _point_estimates(regression: Regression, dt: Array, at_zero: NDArray[np.intp]) -> dict[str, Array]:
    """Parameters and log-likelihood; `at_zero` are the places of a slope of exactly zero."""
    n, beta, rss = regression.n, regression.slope, regression.rss
    log_b = _log_b(regression)
    kappa = log_b / -dt
    theta = regression.level - regression.drift / beta
    per_step = log_b / (beta * (1 + 0.5 * beta))  # 2 ln b/(b² − 1)
    if at_zero.size:
        kappa[at_zero], theta[at_zero], per_step[at_zero] = 0.0, np.nan, 1.0
    return {
        "kappa": kappa,
        "theta": theta,
        "sigma": np.sqrt(rss * per_step / (n * dt)),
        "loglik": (np.log(rss) + (np.log(2 * np.pi / n) + 1)) * (-0.5 * n),
    }


def _standard_errors(regression: Regression, sigma: Array, dt: Array) -> dict[str, Array]:
    """Of the parameters, by the delta method."""
    n, beta, A = regression.n, regression.slope, regression.spread
    slope_se = np.sqrt(regression.rss / (A * (n - 2.0)))
    h_se = slope_se / (1 + beta)
    away = regression.drift / beta
    theta_se = slope_se * np.sqrt(A / n * regression.evenness + np.square(away)) / np.abs(beta)
    theta_se[beta == 0] = np.nan
    sigma_se = sigma * np.sqrt(1 / (2 * n) + np.square(0.5 * _gradient(regression) * h_se))
    return {"kappa_se": h_se / dt, "theta_se": theta_se, "sigma_se": sigma_se}


def _log_b(regression: Regression) -> Array:
    """The logarithm of the slope b of the AR(1): −kappa Δ."""
    return np.log1p(regression.slope) if regression.log_b is None else regression.log_b


def _gradient(regression: Regression) -> Array:
    """How ln(2h/(1 − e^{−2h})) grows with h = kappa Δ: 1/h − 2/(e^{2h} − 1)."""
    h, beta = -_log_b(regression), regression.slope
    small = np.abs(h) < _CANCELS
    gradient = 1 / h + np.square(1 + beta) / (beta * (1 + 0.5 * beta))
    gradient[small] = 1 - h[small] / 3 + h[small] ** 3 / 45
    return gradient


def _interval_estimates(regression: Regression, robust: Array, fourth: Array, dt: Array) -> dict[str, Array]:
    """Kurtosis, and the columns that need the slope's exact law (NaN where it is not tabulated)."""
    n, A, rss = regression.n, regression.spread, regression.rss
    kurtosis = n * fourth / np.square(rss)
    law = slope_law(n)
    if law is None:
        nothing = np.full(rss.shape, np.nan)
        return {"kurtosis": kurtosis, "kappa_median_unbiased": nothing, "kappa_lower": nothing, "kappa_upper": nothing}
    b, s2, duration = 1 + regression.slope, rss / (n - 2), n * dt
    pull = widened_pull(law, b, np.sqrt(n * robust / (A * rss)))
    uneven = regression.evenness
    theta = theta_set(law, b, mean_from=0.0, mean_to=regression.drift, A=A * uneven, s2=s2 * uneven)
    sigma = sigma_interval(n, b, median_pull=pull.median, A=A, s2=s2, kurtosis=kurtosis, step=dt)
    return {
        "kappa_lower": finite(pull.lower / duration),
        "kappa_upper": finite(pull.upper / duration),
        "theta_lower": regression.level + theta.lower,
        "theta_upper": regression.level + theta.upper,
        "sigma_lower": sigma.lower,
        "sigma_upper": finite(sigma.upper),
        "kappa_median_unbiased": finite(pull.median / duration),
        "no_reversion_p": law.p_no_pull(b),
        "kurtosis": kurtosis,
    }


def _formulas(columns: dict[str, Array]) -> dict[str, Array]:
    """The columns that are formulas of others, as their SQL has them but for the need of a pull."""
    return half_lives(columns) | {"stationary_sd": columns["sigma"] / np.sqrt(2 * columns["kappa"])}


def _from_windows(intervals: bool, windows: Array, steps: Array) -> tuple[dict[str, Array], NDArray[np.int8]]:
    """Columns and status of windows of finite values, shape (m, n + 1), and equal steps."""
    regression, unit, flat = from_windows(windows)
    columns, status = _estimates(regression if intervals else regression.without_fourth(), steps[:, -1])
    return _in_units(columns, status, windows.shape[1] - 1, unit, flat)


def _from_unequal_windows(intervals: bool, windows: Array, steps: Array) -> tuple[dict[str, Array], NDArray[np.int8]]:
    """The same for unequal steps, shape (m, n)."""
    solution, unit, flat = unequal.from_windows(windows, steps, fourth=intervals)
    columns, status = _of_solution(solution)
    return _in_units(columns, status, solution.n, unit, flat)


def _in_units(
    columns: dict[str, Array], status: NDArray[np.int8], n: int, unit: Array, flat: Mask
) -> tuple[dict[str, Array], NDArray[np.int8]]:
    """Columns of observations divided by a unit, in units of their own, and without those that are flat."""
    for name in _IN_UNITS_OF_X:
        if name in columns:
            columns[name] *= unit
    columns["loglik"] -= n * np.log(unit)
    flat &= status != Status.ALTERNATING
    status[flat] = Status.FLAT
    blank(columns, np.flatnonzero(flat))
    return columns, status


def log_density(x: Array, steps: Array, kappa: Array, theta: Array, sigma: Array) -> Array:
    """Log-likelihood of windows, shape (..., n + 1), at given parameters."""
    kappa, theta, sigma = kappa[..., None], theta[..., None], sigma[..., None]
    from_theta, pull = x - theta, kappa * steps
    residual = (np.diff(x, axis=-1) - from_theta[..., :-1] * np.expm1(-pull)) / sigma
    euler = np.where(pull == 0, 1.0, -np.expm1(-2 * pull) / np.where(pull == 0, 1.0, 2 * pull))
    variance = steps * euler
    terms = np.log(2 * np.pi * np.square(sigma) * variance) + np.square(residual) / variance
    return np.asarray(np.where(sigma[..., 0] > 0, -0.5 * terms.sum(axis=-1), np.nan))


MODEL = Model(
    name="ou",
    revision=1,
    equation="dX = kappa (theta - X) dt + sigma dW",
    range="real",
    has_pull=True,
    is_relative=False,
    local_volatility=("sigma", "sigma_lower", "sigma_upper"),
    local_drift="kappa * (theta - x)",
    reaches_zero=True,
    steps="any",
    shortest=SHORTEST,
    parameters=PARAMETERS,
    columns=COLUMNS,
    kernel=fit_piece,
    log_density=log_density,
)
