"""The square-root process dX = kappa (theta − X) dt + sigma √X dW with kappa theta > 0, by its exact likelihood.

The transition law is a noncentral χ², with a Bessel function of the order q = 2 kappa theta/sigma² − 1; see
`driftbook.estimators.square_root`. Windows of equal steps are fitted from sums over windows in rolling position
(`driftbook.estimators.hankel_sums`), others and those few that the sums cannot vouch for, transition by transition.
Either way Newton's method climbs to the maximum with exact second derivatives, over kappa of either sign and
alpha = kappa theta ≥ 0. A window whose likelihood is largest at alpha = 0 is `at_bound`. One with more than three in
four values unchanged is `discrete`: what it says of a diffusion is how often somebody looked.

Standard errors are those of the observed information. Intervals:

* kappa: the slope's law of the AR(1) is fed e^{−kappa T/n}: the information on kappa, T/(2 kappa) with alpha profiled
  out, is that of an Ornstein–Uhlenbeck process while paths stay away from zero. It is widened by the larger of two
  ratios of standard errors: the information's to that process's, which is up to 1.3 near zero; and White's (1980) to
  the ordinary one in the regression of increments of √X, over √Δ, on √X, whose errors have even variance in this model.
* theta: all theta₀ with (alpha − theta₀ kappa)² ≤ k Var(alpha − theta₀ kappa), Fieller's set with the critical value of
  that law.
* sigma: on ln sigma, with the variance of the information, and (kurtosis − 3)/(4n) more where the errors of that
  regression have fat tails; centred as for Ornstein–Uhlenbeck.
* feller_ratio, 2 kappa theta/sigma²: what the information says of it at a given kappa, and kappa's own interval, which
  it moves with; the two reaches are added in squares (Zou, G. Y. & Donner, A. (2008), Construction of confidence
  limits about effect measures, Statistics in Medicine 27, 1693–1702). In short windows without a clear pull the low end
  so found is too high; it is at most the estimate less √k standard errors, with k as for theta.

In 36 cells of 2000 simulated windows, of 60, 250 and 1000 steps with kappa T of 1, 5, 20 and 60 and feller ratios of
0.6, 1.5 and 6, nominal 95 % intervals of windows that are not `at_bound` held the truth in 92.8–97.6 % (kappa; the
least at kappa T = 1 with a ratio of 0.6), 95.0–99.7 % (theta, an open set counting as held), 94.6–96.8 % (sigma, for
kappa Δ to 0.33) and 93.9–97.1 % (feller_ratio). At kappa Δ = 1 sigma's, where it is given at all, held in 82–88 % only.

References
----------
Feller, W. (1951), Two singular diffusion problems, Annals of Mathematics 54, 173–182. Cox, J. C., Ingersoll, J. E. &
Ross, S. A. (1985), A theory of the term structure of interest rates, Econometrica 53, 385–407. Fieller, E. C. (1954),
Some problems in interval estimation, J. Royal Statistical Society B 16, 175–185. White, H. (1980), A
heteroskedasticity-consistent covariance matrix estimator, Econometrica 48, 817–838.
"""

from __future__ import annotations

from dataclasses import dataclass, replace
from functools import partial

import numpy as np
from numpy.typing import NDArray

from driftbook.estimators import square_root
from driftbook.estimators.batches import Answer, Piece
from driftbook.estimators.hankel_sums import STALE, TRUNCATED, Roots, Summing, Sums
from driftbook.estimators.intervals import COARSEST, PullInterval, exact_over_euler, widened_pull
from driftbook.estimators.maximise import Limits, Places, maximise
from driftbook.estimators.model import Column, Model, Parameter, parameter_columns
from driftbook.estimators.regression import EPS, Mask, from_sums, from_windows
from driftbook.estimators.repair import blank, repair
from driftbook.estimators.slope_law import slope_law
from driftbook.estimators.square_root import FASTEST, Windows, is_still, log_ratio, log_ratio_slope, order
from driftbook.estimators.status import Status
from driftbook.estimators.stepping import by_steps
from driftbook.estimators.windows import Array

SHORTEST = 5
LN2 = float(np.log(2.0))
LOST = 1e-7  # of a log-likelihood, that rounding may take
CLOSE = 1e-10  # gain that a last step may still promise: standard errors are then good to 1e-6
ROUNDS = 20  # after which a window that sums did not settle is taken transition by transition
TWO_SIDED = 1.959963984540054

PARAMETERS = (
    Parameter("kappa", "1/t", "Speed of the pull to theta; the likelihood's estimate, some 4/T too high on average."),
    Parameter("theta", "x", "Level that the series is pulled to."),
    Parameter("sigma", "√x/√t", "Volatility of the driving noise: times √x it is that of the series."),
)

COLUMNS = (
    *(column for parameter in PARAMETERS for column in parameter_columns(parameter)),
    Column("kappa_median_unbiased", "1/t", "Estimate of kappa that is too high as often as too low."),
    Column("no_reversion_p", "", "One-sided p-value of no pull; below 0.05 speaks for a pull."),
    Column(
        "half_life",
        "t",
        "Time in which a distance to theta halves, by kappa_median_unbiased; empty without evidence of a pull.",
        "CASE WHEN kappa > 0 THEN ln(2) / nullif(kappa_median_unbiased, 0) END",
    ),
    Column(
        "half_life_lower",
        "t",
        "Lower end of the 95 % interval of half_life; empty: no end on this side.",
        "CASE WHEN kappa_upper > 0 THEN ln(2) / kappa_upper END",
    ),
    Column(
        "half_life_upper",
        "t",
        "Upper end of the 95 % interval of half_life; empty: no end on this side.",
        "CASE WHEN kappa_lower > 0 THEN ln(2) / kappa_lower END",
    ),
    Column(
        "half_life_mle",
        "t",
        "Half-life by kappa itself: too short on average.",
        "CASE WHEN kappa > 0 THEN ln(2) / kappa END",
    ),
    Column(
        "half_life_unbounded",
        "",
        "Whether the data leave the half-life without an upper end.",
        "kappa_lower = 0",
        "boolean",
    ),
    Column(
        "stationary_sd",
        "x",
        "Standard deviation of the stationary law; empty where there is none.",
        "CASE WHEN kappa > 0 THEN sigma * sqrt(theta / (2 * kappa)) END",
    ),
    Column(
        "feller_ratio",
        "",
        "2 kappa theta / sigma²: paths reach zero where it is below 1. Biased upwards, as kappa is.",
        "2 * kappa * theta / (sigma * sigma)",
    ),
    Column("feller_ratio_lower", "", "Lower end of the 95 % interval of feller_ratio."),
    Column("feller_ratio_upper", "", "Upper end of the 95 % interval of feller_ratio; empty: no end on this side."),
    Column(
        "can_reach_zero",
        "",
        "Whether paths reach zero; empty where the interval of feller_ratio holds 1.",
        "CASE WHEN feller_ratio_upper < 1 THEN true WHEN feller_ratio_lower > 1 THEN false END",
        "boolean",
    ),
    Column("kurtosis", "", "Fourth moment of the residuals of √x over the squared second: about 3 for this model."),
    Column("loglik", "", "Log-likelihood of the observations after the first, given the first."),
)

_LIMITS = Limits((-np.inf, -0.5 * FASTEST, 0.0), (np.inf, 0.5 * FASTEST, np.inf), (1.0, 0.25, np.inf), (0.0, 0.5, 0.0))


@dataclass(frozen=True)
class Residuals:
    """Of the regression of increments of √x on √x, arrays of shape (m,).

    Attributes
    ----------
    kurtosis : array
    widening : array
        White's standard error of the slope over the ordinary one.
    """

    kurtosis: Array
    widening: Array

    def take(self, places: Places) -> Residuals:
        """Of some of the windows."""
        return Residuals(self.kurtosis[places], self.widening[places])


@dataclass(frozen=True)
class Optimum:
    """Where likelihoods are largest, arrays of shape (m,).

    Attributes
    ----------
    n : int
        Steps in a window.
    dt : array
        Mean step D.
    level, h, alpha : array
        ln(2/(sigma² D)), kappa D and kappa theta D.
    covariance : array, shape (3, 3, m)
        Of these; of no meaning if no intervals are wanted.
    loglik : array
    settled : array of bool
        Whether the climb ended.
    """

    n: int
    dt: Array
    level: Array
    h: Array
    alpha: Array
    covariance: Array
    loglik: Array
    settled: Mask


def fit_equal(piece: Piece) -> Answer:
    """Fit every window of a piece, of equal steps; see `driftbook.estimators.batches`."""
    piece, roots = _positive(piece)
    regression, sound = from_sums(replace(piece, x=roots))
    flat = regression.flat()
    m = flat.slope.size
    residuals = None
    if flat.robust is not None and flat.fourth is not None:
        n = flat.n
        widening = np.sqrt(n * flat.robust / (flat.spread * flat.rss))
        residuals = Residuals(n * flat.fourth / np.square(flat.rss), widening)
    columns = {name: np.empty(m) for name in _names(piece.lookback, piece.intervals)}
    status, done = np.zeros(m, dtype=np.int8), np.zeros(m, dtype=np.bool_)
    summing = Summing(piece, Roots.of(piece, roots))
    status[summing.stale], done[summing.stale] = Status.DISCRETE, True
    blank(columns, np.flatnonzero(summing.stale))
    for places, sums, start in summing.groups():
        optimum, kept = _climbed(piece, places, sums, start)
        found, became = _estimates(optimum, None if residuals is None else residuals.take(places))
        _put(columns, places, found)
        status[places], done[places] = became, kept
    doubtful = np.flatnonzero(~(done & sound.reshape(-1)))
    if doubtful.size:
        repair(piece, doubtful, partial(_from_windows, piece.intervals), columns, status)
    return Answer(columns, status)


def fit_any(piece: Piece) -> Answer:
    """The same for any steps, transition by transition."""
    piece, _ = _positive(piece)
    m = int(np.prod(piece.shape))
    columns = {name: np.empty(m) for name in _names(piece.lookback, piece.intervals)}
    status = np.zeros(m, dtype=np.int8)
    repair(piece, np.arange(m), partial(_from_windows, piece.intervals), columns, status)
    return Answer(columns, status)


fit_piece = by_steps(fit_equal, fit_any)


def _positive(piece: Piece) -> tuple[Piece, Array]:
    """The piece with its values, NaN where they are not positive and finite, and their roots."""
    x = np.where((piece.x > 0) & np.isfinite(piece.x), piece.x, np.nan)
    return replace(piece, x=x), np.sqrt(x)


def _put(columns: dict[str, Array], places: Places, found: dict[str, Array]) -> None:
    for name, values in columns.items():
        values[places] = found[name]


def _names(n: int, intervals: bool) -> list[str]:
    """Names of the columns of a fit."""
    none = np.empty(0)
    nothing = Optimum(n, none, none, none, none, np.empty((3, 3, 0)), none, np.empty(0, dtype=np.bool_))
    return list(_estimates(nothing, Residuals(none, none) if intervals else None)[0])


def _climbed(piece: Piece, places: Places, sums: Sums, start: Array) -> tuple[Optimum, Mask]:
    """The optimum of some windows, and whether their sums can vouch for it."""
    top = maximise(sums.surface, start, _LIMITS, most_rounds=ROUNDS, close=CLOSE)
    psi, rho, scaled = top.point
    h = -2 * rho
    f = log_ratio(h)
    alpha = scaled * np.exp(f)
    kept: Mask = top.converged & (sums.rest(top.point) <= TRUNCATED)
    dt = piece.of_windows(piece.dt)[places]
    covariance = _of_level_h_and_alpha(top.covariance(), h, alpha, np.exp(f)) if piece.intervals else top.hessian
    return Optimum(piece.lookback, dt, psi - f, h, alpha, covariance, top.value, top.converged), kept


def _from_windows(intervals: bool, x: Array, steps: Array) -> tuple[dict[str, Array], NDArray[np.int8]]:
    """Columns and status of windows of positive values, shape (m, n + 1), and their steps, (m, n)."""
    m, n = steps.shape
    flat = from_windows(np.sqrt(x))[2] | from_windows(x)[2]
    stale = (np.diff(x, axis=1) == 0).sum(axis=1) > STALE * n
    still = is_still(x.mean(axis=1), np.square(np.diff(np.sqrt(x), axis=1)).sum(axis=1))
    columns = {name: np.full(m, np.nan) for name in _names(n, intervals)}
    status = np.select([flat, stale], [Status.FLAT, Status.DISCRETE], Status.NOT_CONVERGED).astype(np.int8)
    usable = np.flatnonzero(~(flat | stale | still))
    if usable.size:
        windows = Windows.of(x[usable], steps[usable])
        top = maximise(windows.surface, windows.start(), square_root.LIMITS)
        level, h, alpha = top.point
        dt = steps[usable].mean(axis=1)
        optimum = Optimum(n, dt, level, h, alpha, top.covariance(), top.value, top.converged)
        found, status[usable] = _estimates(optimum, _residuals(windows) if intervals else None)
        _put(columns, usable, found)
    return columns, status


def _residuals(windows: Windows) -> Residuals:
    """Of windows themselves."""
    root = np.sqrt(windows.weight)
    e = windows.d / root
    lever = root
    u = root * windows.a
    norm = (lever * lever).sum(axis=1, keepdims=True)
    u = u - lever * ((lever * u).sum(axis=1, keepdims=True) / norm)
    e = e - lever * ((lever * e).sum(axis=1, keepdims=True) / norm)
    spread = (u * u).sum(axis=1)
    e = e - u * ((u * e).sum(axis=1) / spread)[:, None]
    squares = e * e
    rss, n = squares.sum(axis=1), e.shape[1]
    widening = np.sqrt(n * (u * u * squares).sum(axis=1) / (spread * rss))
    return Residuals(n * (squares * squares).sum(axis=1) / np.square(rss), widening)


def _of_level_h_and_alpha(covariance: Array, h: Array, alpha: Array, ratio: Array) -> Array:
    """From psi, rho and alpha/e^f to psi − f(h), h = −2 rho and alpha."""
    slope = log_ratio_slope(h)
    jacobian = (((0, 1.0), (1, 2 * slope)), ((1, -2.0),), ((1, -2 * slope * alpha), (2, ratio)))
    rows = [sum(weight * covariance[k] for k, weight in row) for row in jacobian]
    found = np.empty_like(covariance)
    for i, row in enumerate(rows):
        for j, column in enumerate(jacobian[: i + 1]):
            found[i, j] = found[j, i] = sum(weight * row[k] for k, weight in column)
    return found


def _estimates(optimum: Optimum, residuals: Residuals | None) -> tuple[dict[str, Array], NDArray[np.int8]]:
    """Columns and status of windows of shape (m,); all columns if there are residuals."""
    at_zero = optimum.alpha <= 0
    columns = _point_estimates(optimum)
    if residuals is not None:
        columns |= _standard_errors(optimum, columns)
        columns |= _interval_estimates(optimum, residuals, columns)
        columns |= _formulas(columns)
        blank({name: columns[name] for name in _NEED_A_PULL}, np.flatnonzero(columns["kappa"] <= 0))
    status = np.where(optimum.h <= 0, Status.NO_REVERSION, Status.OK).astype(np.int8)
    status[at_zero] = Status.AT_BOUND
    for lost, became in (
        (optimum.h >= FASTEST, Status.ALTERNATING),
        (~optimum.settled | ~(optimum.h > -FASTEST) | (_rounding(optimum) > LOST), Status.NOT_CONVERGED),
    ):
        status[lost] = became
        blank(columns, np.flatnonzero(lost))
    return columns, status


def _rounding(optimum: Optimum) -> Array:
    """About what rounding does to the log-likelihood, whose largest terms, n q h, cancel."""
    return np.asarray(EPS * optimum.n * np.abs(order(optimum.level, optimum.alpha) * optimum.h))


_NEED_A_PULL = ("half_life", "half_life_mle", "stationary_sd")


def _point_estimates(optimum: Optimum) -> dict[str, Array]:
    variance = 2 * np.exp(-optimum.level)
    return {
        "kappa": optimum.h / optimum.dt,
        "theta": np.where(optimum.h == 0, np.nan, optimum.alpha / optimum.h),
        "sigma": np.sqrt(variance / optimum.dt),
        "loglik": optimum.loglik,
    }


def _standard_errors(optimum: Optimum, columns: dict[str, Array]) -> dict[str, Array]:
    C, h, theta = optimum.covariance, optimum.h, columns["theta"]
    return {
        "kappa_se": np.sqrt(C[1, 1]) / optimum.dt,
        "theta_se": np.sqrt(C[2, 2] - 2 * theta * C[1, 2] + np.square(theta) * C[1, 1]) / np.abs(h),
        "sigma_se": 0.5 * columns["sigma"] * np.sqrt(C[0, 0]),
    }


def _interval_estimates(optimum: Optimum, residuals: Residuals, columns: dict[str, Array]) -> dict[str, Array]:
    """Kurtosis, and the columns that need the slope's law (NaN where it is not tabulated)."""
    law = slope_law(optimum.n)
    if law is None:
        nothing = np.full(optimum.h.shape, np.nan)
        return {"kurtosis": residuals.kurtosis} | dict.fromkeys(_BY_LAW, nothing)
    slope, duration = np.exp(-optimum.h), optimum.n * optimum.dt
    usual = np.sqrt(np.expm1(2 * np.abs(optimum.h)) / optimum.n)
    own = np.sqrt(optimum.covariance[1, 1]) / usual
    pull = widened_pull(law, slope, np.fmax(residuals.widening, own))
    critical = law.theta_critical(law.lower_90(slope))
    theta = _theta_set(optimum, critical)
    sigma = _sigma_interval(optimum, residuals.kurtosis, pull.median, columns["sigma"])
    feller = _feller_interval(optimum, pull, critical)
    return {
        "kurtosis": residuals.kurtosis,
        "kappa_lower": _finite(pull.lower / duration),
        "kappa_upper": _finite(pull.upper / duration),
        "kappa_median_unbiased": _finite(pull.median / duration),
        "no_reversion_p": law.p_no_pull(slope),
        "theta_lower": theta[0],
        "theta_upper": theta[1],
        "sigma_lower": sigma[0],
        "sigma_upper": sigma[1],
        "feller_ratio_lower": feller[0],
        "feller_ratio_upper": feller[1],
    }


_BY_LAW = (
    "kappa_lower",
    "kappa_upper",
    "kappa_median_unbiased",
    "no_reversion_p",
    "feller_ratio_lower",
    "feller_ratio_upper",
)


def _theta_set(optimum: Optimum, critical: Array) -> tuple[Array, Array]:
    """Ends of the set of all theta₀ with (alpha − theta₀ kappa)² ≤ k Var; NaN where it is unbounded."""
    h, alpha, C = optimum.h, optimum.alpha, optimum.covariance
    a = np.square(h) - critical * C[1, 1]
    b = alpha * h - critical * C[1, 2]
    c = np.square(alpha) - critical * C[2, 2]
    root = np.sqrt(np.square(b) - a * c)
    bounded = a > 0
    lower = np.where(bounded, np.maximum((b - root) / a, 0.0), np.nan)
    return lower, np.where(bounded, (b + root) / a, np.nan)


def _sigma_interval(optimum: Optimum, kurtosis: Array, median: Array, sigma: Array) -> tuple[Array, Array]:
    """On ln sigma; NaN where the pull per step is over `COARSEST`."""
    n, h = optimum.n, optimum.h
    unbiased = np.maximum(np.where(np.isfinite(median), median / n, h), 0.0)
    ratio = exact_over_euler(unbiased) / exact_over_euler(np.maximum(h, 0.0))
    centre = sigma * np.sqrt(ratio * (n / (n - 2)))
    own = np.maximum(0.25 * optimum.covariance[0, 0], 1 / (2 * (n - 2)))
    reach = TWO_SIDED * np.sqrt(own + np.maximum(kurtosis - 3, 0.0) / (4 * n))
    reach = np.where(h <= COARSEST, reach, np.nan)
    return centre * np.exp(-reach), centre * np.exp(reach)


def _feller_interval(optimum: Optimum, pull: PullInterval, critical: Array) -> tuple[Array, Array]:
    """Of alpha e^level, from kappa's; its low end is no higher than the critical value of theta's set has it."""
    n, C, scale = optimum.n, optimum.covariance, np.exp(optimum.level)
    ratio = optimum.alpha * scale
    variance = np.square(ratio) * C[0, 0] + 2 * ratio * scale * C[0, 2] + np.square(scale) * C[2, 2]
    with_h = ratio * C[0, 1] + scale * C[1, 2]
    along = with_h / C[1, 1]
    own = np.square(TWO_SIDED) * (variance - along * with_h)
    centre = ratio + along * (pull.median / n - optimum.h)
    below = centre - np.sqrt(own + np.square(along * (pull.median - pull.lower) / n))
    above = centre + np.sqrt(own + np.square(along * (pull.upper - pull.median) / n))
    return np.maximum(np.fmin(below, ratio - np.sqrt(critical * variance)), 0.0), _finite(above)


def _formulas(columns: dict[str, Array]) -> dict[str, Array]:
    """The columns that are formulas of others, as their SQL has them but for the need of a pull."""
    kappa, lower, sigma = columns["kappa"], columns["kappa_lower"], columns["sigma"]
    below, above = columns["feller_ratio_lower"], columns["feller_ratio_upper"]
    return {
        "half_life": _finite(LN2 / columns["kappa_median_unbiased"]),
        "half_life_lower": _finite(LN2 / columns["kappa_upper"]),
        "half_life_upper": _finite(LN2 / lower),
        "half_life_mle": LN2 / kappa,
        "half_life_unbounded": np.where(np.isnan(lower), np.nan, lower == 0),
        "stationary_sd": sigma * np.sqrt(columns["theta"] / (2 * kappa)),
        "feller_ratio": 2 * kappa * columns["theta"] / (sigma * sigma),
        "can_reach_zero": np.where(above < 1, 1.0, np.where(below > 1, 0.0, np.nan)),
    }


def _finite(values: Array) -> Array:
    """NaN in place of infinity, which is how a missing end is told."""
    values[np.isinf(values)] = np.nan
    return values


MODEL = Model(
    name="cir",
    revision=1,
    equation="dX = kappa (theta - X) dt + sigma sqrt(X) dW, kappa theta > 0",
    range="positive",
    is_relative=False,
    local_volatility=("sigma * sqrt(x)", "sigma_lower * sqrt(x)", "sigma_upper * sqrt(x)"),
    local_drift="kappa * (theta - x)",
    reaches_zero=None,
    steps="any",
    shortest=SHORTEST,
    parameters=PARAMETERS,
    columns=COLUMNS,
    kernel=fit_piece,
    log_density=square_root.log_density,
)
