"""A damped oscillator whose velocity is hidden: dX = V dt, dV = −damping V dt − omega² (X − theta) dt + eta dW.

It is the second-order Langevin equation in a harmonic well: movement that goes on for a while, as a trend or a swing.
The likelihood is the exact log p(x_1 … x_n | x_0) with V_0 from its stationary law N(0, eta²/(2 damping)), of which X_0
tells nothing. At equal steps it is that of an ARMA(2,1) (`driftbook.estimators.swings`), at others that of a filter.

Strong damping leaves the process of `driftbook.estimators.models.ou`, with kappa_s = omega²/damping and
sigma_s = eta/damping, of which damping and eta can't be told any more. Where the likelihood rises up to there, which
is usual for data without inertia, the status is `Status.AT_BOUND`: kappa_s, theta, sigma_s and the log-likelihood are
those of `ou`, damping, omega and eta empty but for their lower ends. Where motion is so fast for the steps that they
hardly show it, the status is `Status.TOO_COARSE`.

Standard errors are those of the observed information. The interval of damping is on the scale of its logarithm, or
beyond a damping of 2 a step on that of 1/damping, and so is eta's; those of kappa_s and theta, and through them
omega's, come from the exact law of the AR(1) slope, widened (`driftbook.estimators.hidden_pull`), but where damping is
below omega and the window holds two swings, from normal theory. In a window of the time T damping is found too strong
by up to 4/T, as every rate of return is, and kappa_s and sigma_s too low for it: so far their ends reach further.

References
----------
Uhlenbeck, G. E. & Ornstein, L. S. (1930), On the theory of the Brownian motion, Physical Review 36, 823–841.
Chandrasekhar, S. (1943), Stochastic problems in physics and astronomy, Reviews of Modern Physics 15, 1–89.
"""

from __future__ import annotations

from collections.abc import Iterator
from functools import partial

import numpy as np

from driftbook.estimators.batches import Answer, Piece
from driftbook.estimators.filtered import filtered_sums
from driftbook.estimators.jets import surface, variables
from driftbook.estimators.level_or_log import also_of_logs
from driftbook.estimators.maximise import Limits, Maximum, Surface, maximise
from driftbook.estimators.model import Column, Model, Parameter, parameter_columns
from driftbook.estimators.models import ou
from driftbook.estimators.noisy import centred
from driftbook.estimators.oscillator import motion
from driftbook.estimators.repair import Columns, Places, Statuses, blank, repair
from driftbook.estimators.status import Status
from driftbook.estimators.step_lengths import StepLengths
from driftbook.estimators.step_volatility import STEP_VOLATILITY
from driftbook.estimators.stepping import by_steps
from driftbook.estimators.swing_columns import overdamped_columns, swing_columns
from driftbook.estimators.swing_estimate import Estimate, by_filter, by_sums
from driftbook.estimators.swings import (
    PANEL,
    SwingSums,
    swing_fit,
    swing_start,
    swing_sums,
)
from driftbook.estimators.uneven_hidden import inertial_steps, search
from driftbook.estimators.windows import Array

SHORTEST = 10
LANES = 1 << 9  # nodes by segments that are worked on at one time
FEW, FEW_LANES = 16, 1 << 13  # windows in a segment, up to which more lanes fit in the processor's cache
AT_ONCE = 1 << 11  # windows that are searched at one time
FILTERED = 1 << 13  # windows of unequal steps that are searched at one time
SOMEWHERE, LEAST_START = (0.4, 0.1), (0.02, 1e-4)  # s and b to start from without a fit by index, and at least

PARAMETERS = (
    Parameter("damping", "1/t", "Rate at which the velocity is lost."),
    Parameter("omega", "1/t", "Frequency of the swing without damping, in radians; its square is the force's slope."),
    Parameter("theta", "x", "Level that the series is pulled to."),
    Parameter("eta", "x/t√t", "Volatility of the noise that drives the velocity."),
)

DERIVED = (
    Parameter("kappa_s", "1/t", "omega²/damping: speed of the pull, as of an Ornstein–Uhlenbeck process."),
    Parameter("sigma_s", "x/√t", "eta/damping: volatility over times long against 1/damping."),
)

COLUMNS = (
    *(column for parameter in (*PARAMETERS, *DERIVED) for column in parameter_columns(parameter)),
    Column("no_reversion_p", "", "One-sided p-value of no pull; below 0.05 speaks for a pull."),
    Column(
        "period",
        "t",
        "Length of a swing; empty where damping keeps it from swinging.",
        "CASE WHEN damping < 2 * omega THEN 2 * pi() / sqrt(omega * omega - damping * damping / 4) END",
    ),
    Column(
        "damping_ratio",
        "",
        "Damping over the least that keeps it from swinging, 2 omega: below 1 it swings.",
        "CASE WHEN omega > 0 THEN damping / (2 * omega) END",
    ),
    Column("kurtosis", "", "Fourth moment of the standardised innovations over the squared second: 3 for a Gaussian."),
    Column("loglik", "", "Log-likelihood of the observations after the first, given the first."),
)

_NAMES = {
    True: tuple(column.name for column in COLUMNS),
    False: (*(parameter.name for parameter in PARAMETERS), "loglik"),
}
_IN_UNITS_OF_X = tuple(column.name for column in COLUMNS if column.unit.startswith("x"))
_FROM_OU = {
    **{f"kappa_s{end}": f"kappa{end}" for end in ("", "_se", "_lower", "_upper")},
    **{f"sigma_s{end}": f"sigma{end}" for end in ("", "_se", "_lower", "_upper")},
    **{name: name for name in ("theta", "theta_se", "theta_lower", "theta_upper")},
    **{name: name for name in ("no_reversion_p", "kurtosis", "loglik")},
}


def limits(n: int) -> Limits:
    """Of s = ln(1 + 1/g), down to g = 500, and of b."""
    return Limits(lower=(2e-3, -0.05), upper=(7.0, 5.0), step=(0.03, 6 / n), growth=(0.6, 0.5))


def fit_equal(piece: Piece) -> Answer:
    """Fit every window of a piece, of equal steps; see `driftbook.estimators.batches`."""
    columns, status = _plain(piece)
    lost = [_fit(piece, places, sums, columns, status) for places, sums in _in_parts(piece)]
    doubtful = np.concatenate(lost)
    if doubtful.size:
        repair(piece, doubtful, partial(_from_windows, piece.intervals), columns, status)
    return Answer(columns, status)


def _in_parts(piece: Piece) -> Iterator[tuple[Places, SwingSums]]:
    """Windows of a piece and their sums, some at a time."""
    levels, steps = piece.by_step(piece.x[:, :-1]), piece.by_step(piece.x[:, 1:] - piece.x[:, :-1])
    levels = levels - levels[..., piece.pivot, None]
    levels, steps = (np.ascontiguousarray(each.reshape(-1, each.shape[-1]).T) for each in (levels, steps))
    at_once = max(1, (LANES if piece.shape[-1] > FEW else FEW_LANES) // PANEL.points)
    for start in range(0, levels.shape[1], at_once):
        part = slice(start, start + at_once)
        sums = _sums(steps[:, part], levels[:, part], piece.lookback, piece.pivot, piece.shape[-1], piece.skip)
        for first in range(0, sums.increment.size, AT_ONCE):
            here = np.arange(first, min(first + AT_ONCE, sums.increment.size))
            yield start * piece.shape[-1] + here, sums.take(here)


def _sums(steps: Array, levels: Array, n: int, pivot: int, windows: int, tail: int) -> SwingSums:
    """Of increments and the levels before them, shape (steps, segments)."""
    sequences = np.zeros((len(steps), 3, steps.shape[1]))
    np.subtract(steps[1:], steps[:-1], out=sequences[1:, 0])
    sequences[1:, 1] = steps[:-1]
    sequences[:, 2] = levels
    found = filtered_sums(sequences, -PANEL.nodes[:, None], pivot, windows, tail, lead=1)
    return swing_sums(n, found, steps[:windows], levels[:windows])


def _plain(piece: Piece) -> tuple[Columns, Statuses]:
    """All columns, filled where `ou` has them."""
    plain = ou.fit_piece(piece)
    columns = {name: np.full(plain.status.size, np.nan) for name in _NAMES[piece.intervals]}
    for name, of_ou in _FROM_OU.items():
        if name in columns:
            columns[name][:] = plain.columns[of_ou].reshape(-1)
    return columns, plain.status.reshape(-1).copy()


def _from_windows(intervals: bool, windows: Array, steps: Array) -> tuple[Columns, Statuses]:
    """Columns and status of windows of finite values, shape (m, n + 1), and equal steps, each searched by itself."""
    n = windows.shape[1] - 1
    exponent = np.frexp(np.abs(windows).max(axis=1))[1] - 1
    piece = Piece(np.ldexp(windows, -exponent[:, None]), steps[:, -1:], None, n, 1, 0, intervals)
    columns, status = _plain(piece)
    segments = centred(piece.x)
    sums = _one_by_one(segments.sequences[:, 0] + segments.usual, segments.sequences[:, 1], n)
    lost = _fit(piece, np.arange(len(windows)), sums, columns, status)
    status[lost] = Status.NOT_CONVERGED
    blank(columns, lost)
    unit = np.ldexp(1.0, exponent)
    for name in _IN_UNITS_OF_X:
        if name in columns:
            columns[name] *= unit
    columns["loglik"] -= n * np.log(unit)
    return columns, status


def _one_by_one(steps: Array, levels: Array, n: int) -> SwingSums:
    """Sums of windows that are segments of their own, from their first step on."""
    sequences = np.stack([np.diff(steps, axis=0), steps[:-1], levels[1:]], axis=1)
    found = filtered_sums(sequences, -PANEL.nodes[:, None], -1, 1, n - 1, lead=0)
    return swing_sums(n, found, steps[:1], levels[:1])


def _fit(piece: Piece, places: Places, sums: SwingSums, columns: Columns, status: Statuses) -> Places:
    """Fit some windows of a piece, and tell which the sums are not sound for."""
    usable = (status[places] != Status.FLAT) & (status[places] != Status.OUT_OF_RANGE)
    if not usable.all():
        places, sums = places[usable], sums.take(np.flatnonzero(usable))
    if not places.size:
        return places
    found = _search(sums)
    overdamped = found.converged & found.at_bound[0] & (found.point[0] < 1)
    overdamped |= found.converged & (found.value <= columns["loglik"][places])
    outside, inside = np.flatnonzero(overdamped), np.flatnonzero(~overdamped)
    dt = piece.dt.reshape(-1)[places // piece.shape[-1]]
    _overdamped(found.take(outside), dt[outside], places[outside], columns, status)
    windows = piece.windows[np.unravel_index(places[inside], piece.shape)]
    estimate = by_sums(sums.take(inside), found.take(inside), windows, dt[inside])
    return _write(estimate, places[inside], columns, status)


def _search(sums: SwingSums) -> Maximum:
    m = sums.increment.size

    def objective(point: Array, at: Places) -> Surface:
        return surface(swing_fit(sums if at.size == m else sums.take(at), *point).loglik)

    return maximise(objective, swing_start(sums), limits(sums.n))


def _overdamped(found: Maximum, mean_step: Array, places: Places, columns: Columns, status: Statuses) -> None:
    """Windows that end where only the process of `ou` is left, whose columns are there already."""
    some = np.flatnonzero(status[places] != Status.ALTERNATING)
    status[places[some]] = Status.AT_BOUND
    some = some[found.at_bound[0, some]]
    if "kurtosis" in columns:
        here = {name: values[places[some]] for name, values in columns.items()}
        for name, values in overdamped_columns(found.take(some), mean_step[some], here).items():
            columns[name][places[some]] = values


def _write(estimate: Estimate, places: Places, columns: Columns, status: Statuses) -> Places:
    """Put an estimate into its places, and tell where it is not sound."""
    for name in columns:
        columns[name][places] = np.nan
    for name, values in swing_columns(estimate, intervals="kurtosis" in columns).items():
        columns[name][places] = values
    status[places] = np.where(estimate.stiffness[0] > 0, np.int8(Status.OK), np.int8(Status.NO_REVERSION))
    status[places[estimate.coarse]] = Status.TOO_COARSE
    status[places[estimate.flat]] = Status.FLAT
    blank(columns, places[estimate.flat])
    return places[~estimate.sound & ~estimate.coarse & ~estimate.flat]


def fit_unequal(piece: Piece) -> Answer:
    """The same for unequal steps, by the filter: the search starts from the fit as if steps were equal."""
    columns, status = _plain(piece)
    start = np.empty((2, status.size))
    for places, sums in _in_parts(piece):
        found = _search(sums)
        point = np.clip(found.point, [[LEAST_START[0]], [LEAST_START[1]]], None)
        start[:, places] = np.where(np.isfinite(found.value), point, [[SOMEWHERE[0]], [SOMEWHERE[1]]])
    usable = np.flatnonzero((status != Status.FLAT) & (status != Status.OUT_OF_RANGE))
    for first in range(0, usable.size, FILTERED):
        part = usable[first : first + FILTERED]
        where = np.unravel_index(part, piece.shape)
        _fit_unequal(piece.windows[where], piece.window_steps[where], start[:, part], part, columns, status)
    return Answer(columns, status)


def _fit_unequal(
    windows: Array, steps: Array, start: Array, places: Places, columns: Columns, status: Statuses
) -> None:
    n = steps.shape[1]
    exponent = np.frexp(np.abs(windows).max(axis=1))[1] - 1
    unit = np.ldexp(1.0, exponent)
    x, lengths = np.ascontiguousarray(np.ldexp(windows, -exponent[:, None]).T), StepLengths.of(steps.T)
    found, fit = search(inertial_steps, start, x - x[0], lengths, limits(n))
    without = columns["loglik"][places] + n * np.log(unit)
    overdamped = (found.converged & found.at_bound[0] & (found.point[0] < 1)) | (found.value <= without)
    out, some = np.flatnonzero(overdamped), np.flatnonzero(~overdamped)
    _overdamped(found.take(out), lengths.duration[out] / n, places[out], columns, status)
    if not some.size:
        return
    part, unit = places[some], unit[some]
    lost = _write(by_filter(found.take(some), fit.take(some), x[:, some], lengths.take(some)), part, columns, status)
    for name in _IN_UNITS_OF_X:
        if name in columns:
            columns[name][part] *= unit
    columns["loglik"][part] -= n * np.log(unit)
    status[lost] = Status.NOT_CONVERGED
    blank(columns, lost)


def log_density(x: Array, steps: Array, damping: Array, omega: Array, theta: Array, eta: Array) -> Array:
    """Log-likelihood of windows, shape (..., n + 1), at given parameters, by the filter of Kalman (1960)."""
    n = x.shape[-1] - 1
    steps = np.broadcast_to(steps, (*x.shape[:-1], n))
    shape = np.broadcast_shapes(x.shape[:-1], damping.shape, omega.shape, theta.shape, eta.shape)
    damping, omega, theta, eta = (np.broadcast_to(each, shape) for each in (damping, omega, theta, eta))
    level, velocity = x - theta[..., None], np.zeros(shape)
    spread, total = 1 / (2 * damping), np.zeros(shape)
    for k in range(n):
        dt = np.broadcast_to(steps[..., k], shape)
        g, w = variables((damping * dt).ravel(), (np.square(omega) * dt * dt).ravel())
        t = {name: jet[0].reshape(shape) for name, jet in vars(motion(g, w)).items()}
        miss = level[..., k + 1] - t["a11"] * level[..., k] - dt * t["a12"] * velocity
        variance = np.square(dt * t["a12"]) * spread + dt**3 * t["q11"]
        both = dt * t["a12"] * t["a22"] * spread + dt**2 * t["q12"]
        total -= 0.5 * (np.log(2 * np.pi * np.square(eta) * variance) + np.square(miss / eta) / variance)
        velocity = t["a21"] / dt * level[..., k] + t["a22"] * velocity + both / variance * miss
        spread = np.square(t["a22"]) * spread + dt * t["q22"] - both * both / variance
    return np.where((damping > 0) & (eta > 0), total, np.nan)


MODEL = also_of_logs(
    Model(
        name="inertial",
        revision=1,
        equation="dX = V dt, dV = -damping V dt - omega^2 (X - theta) dt + eta dW",
        range="real",
        has_pull=True,
        is_relative=False,
        local_volatility=STEP_VOLATILITY,
        local_drift="kappa_s * (theta - x)",
        reaches_zero=True,
        steps="any",
        shortest=SHORTEST,
        parameters=PARAMETERS,
        columns=COLUMNS,
        kernel=by_steps(fit_equal, fit_unequal),
        log_density=log_density,
    ),
    drift_of_logs="kappa_s * (theta - ln(x)) + sigma_s * sigma_s / 2",
)
