"""The square-root process dX = kappa (theta − X) dt + sigma √X dW with kappa theta > 0, by its exact likelihood.

The transition law is a noncentral χ², with a Bessel function of the order q = 2 kappa theta/sigma² − 1; see
`driftbook.estimators.square_root`. Windows of equal steps are fitted from sums over windows in rolling position
(`driftbook.estimators.hankel_sums`), others and those few that the sums cannot vouch for, transition by transition.
Either way Newton's method climbs to the maximum with exact second derivatives, over kappa of either sign and
alpha = kappa theta ≥ 0. A window whose likelihood is largest at alpha = 0 is `at_bound`. One with more than three in
four values unchanged is `discrete`: what it says of a diffusion is how often somebody looked.

Standard errors are those of the observed information; `driftbook.estimators.square_root_intervals` says what intervals
are made of, and how often they hold.

References
----------
Feller, W. (1951), Two singular diffusion problems, Annals of Mathematics 54, 173–182. Cox, J. C., Ingersoll, J. E. &
Ross, S. A. (1985), A theory of the term structure of interest rates, Econometrica 53, 385–407.
"""

from __future__ import annotations

from dataclasses import replace
from functools import partial

import numpy as np
from numpy.typing import NDArray

from driftbook.estimators import half_life, square_root
from driftbook.estimators.batches import Answer, Piece
from driftbook.estimators.hankel_sums import STALE, TRUNCATED, Roots, Summing, Sums
from driftbook.estimators.maximise import Limits, Places, maximise
from driftbook.estimators.model import Column, Model, Parameter, parameter_columns
from driftbook.estimators.regression import Mask, from_sums, from_windows
from driftbook.estimators.repair import blank, repair
from driftbook.estimators.square_root import FASTEST, Windows, is_still, log_ratio
from driftbook.estimators.square_root_intervals import Optimum, Residuals, estimates, of_level_h_and_alpha, residuals_of
from driftbook.estimators.status import Status
from driftbook.estimators.stepping import by_steps
from driftbook.estimators.windows import Array

SHORTEST = 5
CLOSE = 1e-10  # gain that a last step may still promise: standard errors are then good to 1e-6
ROUNDS = 20  # after which a window that sums did not settle is taken transition by transition

PARAMETERS = (
    Parameter("kappa", "1/t", "Speed of the pull to theta; the likelihood's estimate, some 4/T too high on average."),
    Parameter("theta", "x", "Level that the series is pulled to."),
    Parameter("sigma", "√x/√t", "Volatility of the driving noise: times √x it is that of the series."),
)

COLUMNS = (
    *(column for parameter in PARAMETERS for column in parameter_columns(parameter)),
    *half_life.COLUMNS,
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
        found, became = estimates(optimum, None if residuals is None else residuals.take(places))
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
    return list(estimates(nothing, Residuals(none, none) if intervals else None)[0])


def _climbed(piece: Piece, places: Places, sums: Sums, start: Array) -> tuple[Optimum, Mask]:
    """The optimum of some windows, and whether their sums can vouch for it."""
    top = maximise(sums.surface, start, _LIMITS, most_rounds=ROUNDS, close=CLOSE)
    psi, rho, scaled = top.point
    h = -2 * rho
    f = log_ratio(h)
    alpha = scaled * np.exp(f)
    kept: Mask = top.converged & (sums.rest(top.point) <= TRUNCATED)
    dt = piece.of_windows(piece.dt)[places]
    covariance = of_level_h_and_alpha(top.covariance(), h, alpha, np.exp(f)) if piece.intervals else top.hessian
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
        found, status[usable] = estimates(optimum, residuals_of(windows) if intervals else None)
        _put(columns, usable, found)
    return columns, status


MODEL = Model(
    name="cir",
    revision=1,
    equation="dX = kappa (theta - X) dt + sigma sqrt(X) dW, kappa theta > 0",
    range="positive",
    has_pull=True,
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
