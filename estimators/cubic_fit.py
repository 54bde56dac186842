"""Windows fitted with a cubic drift: from sums over windows in rolling position, or from the windows themselves.

The columns are those of `driftbook.estimators.models.quartic`, in the coordinate that the windows are in.
"""

from __future__ import annotations

from collections.abc import Iterable, Iterator, Sequence
from dataclasses import dataclass
from functools import partial

import numpy as np

from driftbook.estimators import cubic
from driftbook.estimators.batches import Answer, Piece
from driftbook.estimators.cubic_uncertainty import MORE, Uncertainty, dot, of_sigma, where_it_vanishes
from driftbook.estimators.movements import TERMS as MOVEMENT_TERMS
from driftbook.estimators.movements import Movements, movement_terms
from driftbook.estimators.parts import in_parts
from driftbook.estimators.polynomial_drift import TERMS, Mask, Optimum, Sums, likelihood_terms, maximise
from driftbook.estimators.regression import EPS, LARGEST, LOSS, ROUNDING, SMALLEST
from driftbook.estimators.repair import Columns, Statuses, blank, repair
from driftbook.estimators.status import Status
from driftbook.estimators.windows import Array, PairedTerms, window_maxima

COARSEST = 0.5
"""Largest |f′|Δ over a window's values up to which the likelihood is trusted."""
COEFFICIENTS = ("a0", "a1", "a2", "a3")
RESTING = ("bottom_lower", "barrier", "bottom_upper")

_PART = 1 << 15  # observations of a piece that are worked on at one time
_LEAST_SHARE = 1e-7  # of a pivot that elimination leaves: coefficients are then good to 1e-6 of their standard errors
_KURTOSIS_LOSS = 1e-7  # largest loss left standing in the kurtosis, whose standard error is some √(24/n)


@dataclass(frozen=True)
class Place:
    """Where windows lie; arrays of shape (m,).

    Attributes
    ----------
    origin : array
        What their values are measured from.
    unit : array or None
        And in which unit; None for 1.
    low, high : array
        Their least and largest value, so measured.
    longest : array
        Longest step.
    """

    origin: Array
    unit: Array | None
    low: Array
    high: Array
    longest: Array


def _from_sums(piece: Piece) -> Answer:
    """Fit every window of a piece; see `driftbook.estimators.batches`."""
    levels, after = piece.by_step(piece.x[:, :-1]), piece.by_step(piece.x[:, 1:])
    d = piece.by_step(piece.x[:, 1:] - piece.x[:, :-1])
    steps = piece.dt[..., None] if piece.steps is None else piece.by_step(piece.steps)
    origin = levels[..., piece.pivot : piece.pivot + 1]
    x, y = levels - origin, after - origin
    totals = _summed(piece, _terms(x, y, d, d, steps, intervals=piece.intervals), _count(intervals=piece.intervals))
    sums = Sums.of(piece.lookback, totals)
    optimum = maximise(sums)
    place = Place(piece.of_windows(origin), None, *_range(piece, x, y), _longest(piece))
    extra = _Extra.of(sums, totals) if piece.intervals else None
    columns, status = _estimates(sums, optimum, place, extra)
    doubtful = np.flatnonzero(~_is_sound(sums, optimum, place, extra))
    if doubtful.size:
        repair(piece, doubtful, partial(_from_windows, piece.intervals), columns, status)
    return Answer(columns, status)


fit_piece = in_parts(_from_sums, _PART)


def _terms(x: Array, y: Array, d: Array, beyond: Array, steps: Array, *, intervals: bool) -> Iterator[Array]:
    """With what increments exceed a constant drift by."""
    yield from likelihood_terms(x, y, beyond, steps, more=MORE if intervals else 0)
    if intervals:
        yield from movement_terms(x, d, beyond, steps)


def _count(*, intervals: bool) -> int:
    return TERMS + (MORE + MOVEMENT_TERMS) * intervals


def _summed(piece: Piece, terms: Iterable[Array], count: int) -> list[Array]:
    """Sums of so many terms over every window, arrays of shape (m,)."""
    room = PairedTerms((*piece.dt.shape, piece.offsets + piece.lookback - 1 - piece.skip), count)
    for part, term in zip(room.parts, terms, strict=True):
        part[...] = term
    return [total.reshape(-1) for total in room.sums(piece.lookback, piece.skip)]


@dataclass(frozen=True)
class _Extra:
    """What intervals take besides the likelihood: sums of higher powers, and movements."""

    higher: Sequence[Array]
    movements: Movements

    @classmethod
    def of(cls, sums: Sums, totals: Sequence[Array]) -> _Extra:
        """From sums of `_terms`."""
        higher, movements = totals[TERMS : TERMS + MORE], totals[TERMS + MORE :]
        return cls(higher, Movements.of(sums.n, movements, sums.plain[0]))


def _range(piece: Piece, x: Array, y: Array) -> tuple[Array, Array]:
    """Least and largest value of every window, shape (m,)."""
    first = x[..., : piece.shape[-1]]
    low = np.minimum(-window_maxima(-y, piece.lookback, piece.skip), first)
    high = np.maximum(window_maxima(y, piece.lookback, piece.skip), first)
    return low.reshape(-1), high.reshape(-1)


def _longest(piece: Piece) -> Array:
    """Longest step of every window, shape (m,)."""
    if piece.steps is None:
        return piece.of_windows(piece.dt)
    return window_maxima(piece.by_step(piece.steps), piece.lookback, piece.skip).reshape(-1)


def _is_sound(sums: Sums, optimum: Optimum, place: Place, extra: _Extra | None) -> Mask:
    """Whether sums kept their digits, and hold more than rounding; NaN compares as false."""
    loss = 4 * EPS * sums.n**0.5 / LOSS
    unexplained = 2 * optimum.unexplained
    sound: Mask = optimum.converged & (optimum.share > _LEAST_SHARE) & np.isfinite(optimum.loglik)
    sound &= (unexplained > loss * sums.squares) & (sums.squares > SMALLEST) & (sums.squares < LARGEST)
    level = np.abs(place.origin) + np.maximum(place.high, -place.low)
    sound &= unexplained * sums.plain[0] > 4 * sums.n**2 * np.square(ROUNDING * level)
    if extra is not None:
        sound &= extra.movements.share > 4 * EPS * sums.n**0.5 / _KURTOSIS_LOSS
    return sound


def _estimates(sums: Sums, optimum: Optimum, place: Place, extra: _Extra | None) -> tuple[Columns, Statuses]:
    """Columns and status of windows, shape (m,); all of them with what intervals take."""
    unit = np.ones(1) if place.unit is None else place.unit
    drift = optimum.drift if sums.rate is None else _with_rate(optimum.drift, sums.rate)
    rows = cubic.shifts(place.origin) if place.unit is None else _to_powers_of_z(place.origin, place.unit)
    sigma = unit * np.sqrt(optimum.variance)
    columns = {name: dot(row, drift) for name, row in zip(COEFFICIENTS, rows, strict=True)}
    columns |= {"sigma": sigma, "loglik": optimum.loglik - sums.n * np.log(unit)}
    steepest = cubic.steepest(drift, place.low, place.high) * place.longest
    if extra is not None:
        uncertainty = Uncertainty.of(sums, optimum, drift, extra.movements, extra.higher)
        columns |= {"steepest": steepest, "kurtosis": extra.movements.kurtosis}
        columns |= _of_coefficients(uncertainty, columns, rows)
        columns |= of_sigma(sums.n, sigma, optimum, extra.movements.kurtosis)
        columns |= _resting_points(drift, uncertainty, place, unit)
    status = np.zeros(sigma.shape, dtype=np.int8)
    status[(drift[3] > 0) | ((drift[3] == 0) & (drift[2] != 0))] = Status.AT_BOUND
    status[steepest > COARSEST] = Status.TOO_COARSE
    status[~optimum.converged] = Status.NOT_CONVERGED
    return columns, status


def _with_rate(drift: Array, rate: Array) -> Array:
    return np.stack([drift[0] + rate, *drift[1:]])


def _to_powers_of_z(origin: Array, unit: Array) -> list[list[Array]]:
    """By what local coefficients enter a0 … a3: from powers of (z − origin)/unit, and rates in that unit."""
    scaled = [unit, np.ones_like(unit), 1 / unit, 1 / (unit * unit)]
    return [[entry * s for entry, s in zip(row, scaled, strict=True)] for row in cubic.shifts(origin)]


def _of_coefficients(uncertainty: Uncertainty, columns: Columns, rows: Sequence[Sequence[Array]]) -> Columns:
    """Standard errors and ends of the intervals of a0 … a3."""
    found: Columns = {}
    row = [np.stack(np.broadcast_arrays(*entries)) for entries in zip(*rows, strict=True)]
    errors = uncertainty.errors(row, uncertainty.factor.solve(row))
    reach = uncertainty.reach(row, errors)
    for name, error, below, above in zip(COEFFICIENTS, errors, reach.below, reach.above, strict=True):
        found[f"{name}_se"] = error
        found[f"{name}_lower"], found[f"{name}_upper"] = columns[name] - below, columns[name] + above
    return found


def _resting_points(drift: Array, uncertainty: Uncertainty, place: Place, unit: Array) -> Columns:
    """Where the drift vanishes, if it has two wells; without ends where the barrier has none: there may be one well."""
    empty = np.full(place.origin.shape, np.nan)
    columns = {f"{name}{end}": empty.copy() for name in RESTING for end in ("", "_se", "_lower", "_upper")}
    roots = cubic.three_roots(drift)
    places = np.flatnonzero((drift[3] < 0) & np.isfinite(roots[0]))
    if places.size:
        z = np.stack([root[places] for root in roots])
        slope, width = cubic.slope(drift[:, places], z), (place.high - place.low)[places]
        errors, below, above = where_it_vanishes(uncertainty.take(places), slope, z, width)
        without_barrier = np.isnan(below[1]) & np.isnan(above[1])
        below[:, without_barrier] = above[:, without_barrier] = np.nan
        origin, size = place.origin[places], np.broadcast_to(unit, place.origin.shape)[places]
        for name, at, error, down, up in zip(RESTING, z, errors, below, above, strict=True):
            columns[name][places], columns[f"{name}_se"][places] = origin + size * at, size * error
            columns[f"{name}_lower"][places] = origin + size * (at - down)
            columns[f"{name}_upper"][places] = origin + size * (at + up)
    return columns


def _from_windows(intervals: bool, windows: Array, steps: Array) -> tuple[Columns, Statuses]:
    """Columns and status of windows of finite values, shape (m, n + 1), from their means and in their own units."""
    n = windows.shape[1] - 1
    origin = windows.mean(axis=1)
    away = windows - origin[:, None]
    largest = np.abs(away).max(axis=1)
    unit = np.ldexp(1.0, np.frexp(np.where(largest > 0, largest, 1.0))[1] - 2)
    local = away / unit[:, None]
    x, y, d = local[:, :-1], local[:, 1:], np.diff(windows, axis=1) / unit[:, None]
    rate = d.sum(axis=1) / steps.sum(axis=1)
    beyond = d - rate[:, None] * steps
    totals = [term.sum(axis=1) for term in _terms(x, y, d, beyond, steps, intervals=intervals)]
    sums = Sums.of(n, totals, rate)
    optimum = maximise(sums)
    place = Place(origin, unit, local.min(axis=1), local.max(axis=1), steps.max(axis=1))
    extra = _Extra.of(sums, totals) if intervals else None
    columns, status = _estimates(sums, optimum, place, extra)
    rounding = np.square(ROUNDING * windows / unit[:, None]).sum(axis=1)
    least = n * rounding / sums.plain[0]
    flat = (largest == 0) | (sums.squares <= least) | (optimum.converged & (2 * optimum.unexplained <= least))
    lost = ~flat & ~(optimum.converged & (optimum.share > EPS * n) & np.isfinite(optimum.loglik))
    status[flat], status[lost] = Status.FLAT, Status.NOT_CONVERGED
    blank(columns, np.flatnonzero(flat | lost))
    return columns, status
