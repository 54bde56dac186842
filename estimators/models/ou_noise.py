"""The Ornstein–Uhlenbeck process observed with white noise, Y = X + noise·ε with dX = kappa (theta − X) dt + sigma dW.

It tells movement from a bid–ask bounce, which looks like a pull where there is none. The likelihood is the exact
log p(y_1 … y_n | y_0) from a flat start: given y_0, X_0 ~ N(y_0, noise²). So it holds with and without a pull, and
contains `driftbook.estimators.models.ou` (noise = 0) and a random walk with noise (kappa = 0).

At equal steps the increments are an AR(1) regression with moving-average errors (`driftbook.estimators.noisy`): with
rho = e^{−kappa Δ}, the root a and the innovations' variance F, noise² = F a/rho, and X has the variance
F (1 − a/rho)(1 − a rho) a step.

About half of all windows of a plain Ornstein–Uhlenbeck process end at a = 0: `Status.AT_BOUND`, with no noise, the
columns and the log-likelihood those of `ou`, but for lower ends of kappa and sigma, which allow for as much noise as
the likelihood does (`driftbook.estimators.noisy_edge`). Where rho < a or rho > 1/a would be best only noise is left,
about a level or a curve: `Status.AT_BOUND` too, with sigma = 0 and no kappa.

Standard errors are those of the observed information. Kappa's interval feeds rho to the exact law of the AR(1) slope,
widened by the standard error of rho over √((1 − rho²)/n + 4/n²), what that law has without noise; theta's is of
Fieller's type; sigma's is on the scale of its logarithm, with fat tails; noise's on that of its square, cut at 0.

References
----------
Harvey, A. C. (1989), Forecasting, Structural Time Series Models and the Kalman Filter, Cambridge University Press.
Roll, R. (1984), A simple implicit measure of the effective bid-ask spread in an efficient market, J. Finance 39,
1127–1139. Self, S. G. & Liang, K.-Y. (1987), Asymptotic properties of maximum likelihood estimators and likelihood
ratio tests under nonstandard conditions, J. American Statistical Association 82, 605–610 (half a χ² at the edge).
"""

from __future__ import annotations

from functools import partial

import numpy as np

from driftbook.estimators.batches import Answer, Piece
from driftbook.estimators.level_or_log import also_of_logs
from driftbook.estimators.maximise import Limits
from driftbook.estimators.model import Column, Model, Parameter, parameter_columns
from driftbook.estimators.models import ou
from driftbook.estimators.noisy import MORE_POINTS, Candidates, Segments, candidates, centred, exact
from driftbook.estimators.noisy_columns import point, with_intervals
from driftbook.estimators.noisy_edge import NoisyEdge, edge_by_filter, edge_by_regression, edge_columns
from driftbook.estimators.noisy_estimate import Estimate, by_filter, by_regression
from driftbook.estimators.noisy_values import first_search
from driftbook.estimators.pull import Pull
from driftbook.estimators.repair import Columns, Places, Statuses, blank, repair
from driftbook.estimators.status import Status
from driftbook.estimators.step_lengths import StepLengths
from driftbook.estimators.stepping import by_steps
from driftbook.estimators.uneven_hidden import noisy_steps, search
from driftbook.estimators.windows import Array

SHORTEST = 10
AT_ONCE = 1 << 18  # observations in the windows that are settled at one time
FILTERED = 1 << 13  # windows of unequal steps that are searched at one time
START_NOISE = 0.02, 30.0  # least and largest noise²/(sigma² Δ) to start a search from
AGREED = 1e-7  # by how much the log-likelihood of a window may differ from what sums over windows said

PARAMETERS = (
    *ou.PARAMETERS,
    Parameter("noise", "x", "Standard deviation of the noise in each observation; 0: none is seen."),
)

_TAKEN_FROM_OU = ou.COLUMNS[4 * len(ou.PARAMETERS) : -2]  # from kappa_median_unbiased to stationary_sd

COLUMNS = (
    *(column for parameter in PARAMETERS for column in parameter_columns(parameter)),
    Column(
        "noise_share",
        "",
        "Share of the noise in the variance of a mean step's increment, 2 noise² over 2 noise² plus that of X in the "
        "stationary law; above 0.1 no_reversion_p of ou is not to be trusted.",
    ),
    Column(
        "no_noise_p",
        "",
        "One-sided p-value of no noise, by half a χ² law, which in windows of 250 steps is 4 where it says 5 %.",
    ),
    *_TAKEN_FROM_OU,
    Column("kurtosis", "", "Fourth moment of the standardised innovations over the squared second: 3 for a Gaussian."),
    Column("loglik", "", "Log-likelihood of the observations after the first, given the first."),
)

_NAMES = {
    True: tuple(column.name for column in COLUMNS),
    False: (*(parameter.name for parameter in PARAMETERS), "loglik"),
}
_IN_UNITS_OF_X = tuple(column.name for column in COLUMNS if column.unit.startswith("x"))


def fit_equal(piece: Piece) -> Answer:
    """Fit every window of a piece, of equal steps; see `driftbook.estimators.batches`."""
    columns, status = _plain(piece)
    doubtful = _settle(piece, _search_by_index(piece), columns, status)
    if doubtful.size:
        repair(piece, doubtful, partial(_from_windows, piece.intervals), columns, status)
    return Answer(columns, status)


def _search_by_index(piece: Piece) -> Candidates:
    """The search in every window of a piece as if its steps were equal."""
    levels, steps = piece.by_step(piece.x[:, :-1]), piece.by_step(piece.x[:, 1:] - piece.x[:, :-1])
    usual, origin = steps[..., piece.pivot], levels[..., piece.pivot]
    sequences = np.stack([steps - usual[..., None], levels - origin[..., None]])
    sequences = sequences.reshape(2, -1, sequences.shape[-1]).transpose(2, 0, 1)
    return candidates(
        Segments(sequences, usual.ravel(), origin.ravel()), piece.lookback, piece.pivot, piece.shape[-1], piece.skip
    )


def _plain(piece: Piece) -> tuple[Columns, Statuses]:
    """All columns, filled where `ou` has them."""
    plain = ou.fit_piece(piece)
    columns = {name: np.full(plain.status.size, np.nan) for name in _NAMES[piece.intervals]}
    for name, values in plain.columns.items():
        columns[name][:] = values.reshape(-1)
    return columns, plain.status.reshape(-1).copy()


def _from_windows(intervals: bool, windows: Array, steps: Array) -> tuple[Columns, Statuses]:
    """Columns and status of windows of finite values, shape (m, n + 1), and equal steps, each searched by itself."""
    n = windows.shape[1] - 1
    exponent = np.frexp(np.abs(windows).max(axis=1))[1] - 1
    piece = Piece(np.ldexp(windows, -exponent[:, None]), steps[:, -1:], None, n, 1, 0, intervals)
    columns, status = _plain(piece)
    lost = _settle(piece, candidates(centred(piece.x), n, -1, 1, n, MORE_POINTS), columns, status)
    status[lost] = Status.NOT_CONVERGED
    blank(columns, lost)
    unit = np.ldexp(1.0, exponent)
    for name in _IN_UNITS_OF_X:
        if name in columns:
            columns[name] *= unit
    columns["loglik"] -= n * np.log(unit)
    return columns, status


def _settle(piece: Piece, found: Candidates, columns: Columns, status: Statuses) -> Places:
    """Fill in what was found, and tell which windows it is not sound for."""
    usable = (status != Status.FLAT) & (status != Status.OUT_OF_RANGE)
    lost = usable & ~np.isfinite(found.value + found.a)
    at_zero = usable & (found.a == 0) & ~found.pure & (status != Status.ALTERNATING)
    none = np.flatnonzero(at_zero)
    dt = np.repeat(piece.dt.reshape(-1), piece.shape[-1])
    _without_noise(edge_by_regression(found.take(none), piece.lookback, dt[none]), dt[none], none, columns, status)
    status[usable & found.swings] = Status.ALTERNATING
    blank(columns, np.flatnonzero(usable & found.swings))
    places = np.flatnonzero(usable & ~lost & ~at_zero & ~found.swings)
    at_once = max(1, AT_ONCE // (piece.lookback + 1))
    for start in range(0, places.size, at_once):
        part = places[start : start + at_once]
        windows = piece.windows[np.unravel_index(part, piece.shape)]
        some = found.take(part)
        fit = exact(windows, some)
        lost[part] = ~(np.abs(fit.value - some.value) <= AGREED * piece.lookback)
        _write(by_regression(fit, some, dt[part]), part, columns, status)
    return np.flatnonzero(lost)


def _without_noise(edge: NoisyEdge, mean_step: Array, places: Places, columns: Columns, status: Statuses) -> None:
    """What is known of the noise where none is seen; the rest is that of `ou`."""
    status[places] = Status.AT_BOUND
    columns["noise"][places] = 0.0
    if "noise_share" in columns:
        columns["noise_share"][places], columns["no_noise_p"][places] = 0.0, 1.0
        here = {name: values[places] for name, values in columns.items()}
        for name, values in edge_columns(edge, mean_step, here).items():
            columns[name][places] = values


def _write(estimate: Estimate, places: Places, columns: Columns, status: Statuses) -> None:
    """Put an estimate into its places."""
    without = np.where(status[places] == Status.ALTERNATING, np.nan, columns["loglik"][places])
    found = point(estimate)
    if "kurtosis" in columns:
        found |= with_intervals(estimate, without)
    for name, values in found.items():
        columns[name][places] = values
    with_pull = np.where(estimate.kappa > 0, np.int8(Status.OK), np.int8(Status.NO_REVERSION))
    status[places] = np.where(estimate.pure, np.int8(Status.AT_BOUND), with_pull)
    status[places[estimate.flat]] = Status.FLAT
    blank(columns, places[estimate.flat])


def fit_unequal(piece: Piece) -> Answer:
    """The same for unequal steps, by the filter: the search starts from the fit as if steps were equal."""
    columns, status = _plain(piece)
    start = _start(_search_by_index(piece), piece.lookback)
    usable = (status != Status.FLAT) & (status != Status.OUT_OF_RANGE)
    places = np.flatnonzero(usable)
    for first in range(0, places.size, FILTERED):
        part = places[first : first + FILTERED]
        where = np.unravel_index(part, piece.shape)
        _fit_unequal(piece.windows[where], piece.window_steps[where], start[:, part], part, columns, status)
    return Answer(columns, status)


def _start(found: Candidates, n: int) -> Array:
    """kappa T and noise²/(sigma² Δ) to start from, shape (2, m)."""
    rho, a = 1 - found.slope, found.a
    h = -np.log(rho)
    share = (a / (rho - a)) / ((1 - a * rho) * Pull(h).q)
    u, v = np.clip(n * h, -10.0, 4.0 * n), np.clip(share, START_NOISE[0], START_NOISE[1])
    known = np.isfinite(found.value + u + v) & ~found.swings
    pure = [[5.0], [START_NOISE[1]]]
    return np.where(known, np.where(found.pure, pure, np.stack([u, v])), [[5.0], [0.1]])


def _fit_unequal(
    windows: Array, steps: Array, start: Array, places: Places, columns: Columns, status: Statuses
) -> None:
    n = steps.shape[1]
    exponent = np.frexp(np.abs(windows).max(axis=1))[1] - 1
    unit = np.ldexp(1.0, exponent)
    x, lengths = np.ascontiguousarray(np.ldexp(windows, -exponent[:, None]).T), StepLengths.of(steps.T)
    limits = Limits(lower=(-60.0, 0.0), upper=(8.0 * n, float(n * n)), step=(3.0, 0.2), growth=(0.5, 0.5))
    start = first_search(start, x - x[0], lengths, limits)
    found, fit = search(noisy_steps, start, x - x[0], lengths, limits)
    without = columns["loglik"][places] + n * np.log(unit)
    none = (found.at_bound[1] & (found.point[1] == 0)) | (found.value <= without)
    none &= found.converged | np.isfinite(without)
    at_zero = np.flatnonzero(none & (status[places] != Status.ALTERNATING))
    edge = edge_by_filter(found.take(at_zero), fit.take(at_zero), lengths.take(at_zero))
    _without_noise(edge, lengths.duration[at_zero] / n, places[at_zero], columns, status)
    some = np.flatnonzero(~none)
    if not some.size:
        return
    estimate = by_filter(found.take(some), fit.take(some), x[:, some], lengths.take(some))
    part, unit = places[some], unit[some]
    columns["loglik"][part] += n * np.log(unit)  # as if values had been divided by it
    _write(estimate, part, columns, status)
    for name in _IN_UNITS_OF_X:
        if name in columns:
            columns[name][part] *= unit
    columns["loglik"][part] -= n * np.log(unit)
    lost = part[~found.converged[some] & ~estimate.pure]
    status[lost] = Status.NOT_CONVERGED
    blank(columns, lost)


def log_density(x: Array, steps: Array, kappa: Array, theta: Array, sigma: Array, noise: Array) -> Array:
    """Log-likelihood of windows, shape (..., n + 1), at given parameters, by the filter of Kalman (1960)."""
    shape = np.broadcast_shapes(x.shape[:-1], kappa.shape, theta.shape, sigma.shape, noise.shape)
    steps = np.broadcast_to(steps, (*x.shape[:-1], x.shape[-1] - 1))
    mean, spread = x[..., 0] - theta, np.square(noise)
    total = np.zeros(shape)
    for k in range(x.shape[-1] - 1):
        pull = Pull(kappa * steps[..., k])
        mean = mean * pull.decay
        hidden = np.square(pull.decay) * spread + np.square(sigma) * steps[..., k] / pull.q
        variance = hidden + np.square(noise)
        miss = x[..., k + 1] - theta - mean
        total -= 0.5 * (np.log(2 * np.pi * variance) + np.square(miss) / variance)
        mean = mean + hidden / variance * miss
        spread = hidden * (np.square(noise) / variance)
    return np.where((sigma >= 0) & (noise >= 0) & (sigma + noise > 0), total, np.nan)


MODEL = also_of_logs(
    Model(
        name="ou_noise",
        revision=1,
        equation="Y = X + noise * epsilon, dX = kappa (theta - X) dt + sigma dW",
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
        kernel=by_steps(fit_equal, fit_unequal),
        log_density=log_density,
    ),
    drift_of_logs="kappa * (theta - ln(x)) + sigma * sigma / 2",
)
