"""Diffusion in a potential of degree four: dX = f dt + sigma dW, f = a0 + a1 z + a2 z² + a3 z³, z = (X − centre)/scale.

The overdamped Langevin equation with −U′ = f. There is no closed transition density; the likelihood is the closed-form
expansion of second order in the step (`driftbook.estimators.polynomial_drift`), which given sigma is exactly quadratic
in the drift: a few sums over windows in rolling position stand for a window, and one equation in sigma is left.

How far the expansion is from the exact density, as E|ln p − ln p_exact| a step under the stationary law, against the
Fokker–Planck equation solved numerically (`driftbook.estimators.transition`), for f = s (x − x³) with sigma = 1, and
of Euler's scheme:

======  ======  ==========  ==========  =======
s       s Δ     max|f′|Δ    expansion   Euler
======  ======  ==========  ==========  =======
2       0.008   0.06        3.0e-7      7.0e-3
2       0.038   0.31        3.1e-5      3.3e-2
2       0.083   0.68        2.9e-4      6.7e-2
2       0.167   1.36        2.0e-3      1.3e-1
8       0.032   0.16        7.8e-6      2.7e-2
8       0.154   0.78        7.4e-4      1.2e-1
8       0.333   1.68        6.2e-3      2.4e-1
8       0.8     4.04        6.1e-2      5.1e-1
======  ======  ==========  ==========  =======

max|f′|Δ is over the central 99.9 % of that law. Where it exceeds a half over the range of a window's values, the fit
is `too_coarse`: its numbers stand, but the likelihood is not to be compared.

A cubic that does not point inwards on both sides (a3 > 0, or a3 = 0 with a2 ≠ 0) lets paths explode in finite time.
Windows with one well, or none, often are fitted best by such a one. It describes the window, between its extremes, and
nothing beyond them: `at_bound`.

`centre` and `scale` are settings of a series, not estimates, so that a0 … a3 of its windows compare. They are not found
in a window: without being told, `rolling` takes the mean and the standard deviation of the first window of the series
that it is given. **A slice of a series has another first window**: to get the numbers of the whole, pass its `centre`
and `scale`. Everything but a0 … a3 is free of them, but for rounding.

Standard errors of a0 … a3 are those of the observed information or of White's (1980) sandwich, whichever are larger;
the interval of sigma is on ln sigma, with the kurtosis of the residuals, and holds the truth in 93 to 96 % of windows
of 60 to 1000 steps. **Intervals of a0 … a3 and of the resting points are of Wald's type and hold it less often than
they say where a window spans few crossings**: like kappa of the Ornstein–Uhlenbeck process, the drift is estimated as
too strong a pull in short windows. Share of intervals that held the truth, daily steps, 1000 windows each:

==================================  ====  ====  ====  ====  ====
truth                               n     a0    a1    a2    a3
==================================  ====  ====  ====  ====  ====
f = 8 (x − x³), sigma = 1.5         60    0.84  0.85  0.85  0.85
…                                   250   0.83  0.84  0.85  0.86
…                                   1000  0.90  0.90  0.92  0.93
f = 1 + 30 (x − x³), sigma = 3      250   0.91  0.88  0.93  0.94
…                                   1000  0.95  0.92  0.97  0.95
f = −5 (x + x³), sigma = 1          250   0.95  0.92  0.91  0.86
…                                   1000  0.97  0.94  0.94  0.92
==================================  ====  ====  ====  ====  ====

References
----------
Langevin, P. (1908), Sur la théorie du mouvement brownien, Comptes rendus 146, 530–533. Aït-Sahalia, Y. (2002), Maximum
likelihood estimation of discretely sampled diffusions: a closed-form approximation approach, Econometrica 70, 223–262.
White, H. (1980), A heteroskedasticity-consistent covariance matrix estimator, Econometrica 48, 817–838.
"""

from __future__ import annotations

from collections.abc import Iterable, Sequence
from dataclasses import dataclass, replace
from functools import partial
from statistics import NormalDist

import numpy as np
from numpy.typing import ArrayLike

from driftbook.estimators import cubic
from driftbook.estimators.batches import Answer, Piece
from driftbook.estimators.cubic_residuals import TERMS as RESIDUAL_TERMS
from driftbook.estimators.cubic_residuals import RateSums, Residuals, residual_terms
from driftbook.estimators.model import Column, Model, Parameter, parameter_columns
from driftbook.estimators.polynomial_drift import SIZE, TERMS, Optimum, Sums, likelihood_terms, maximise
from driftbook.estimators.regression import EPS, LARGEST, LOSS, ROUNDING, SMALLEST, Mask
from driftbook.estimators.repair import GATHERED, Columns, Places, Statuses, blank, repair
from driftbook.estimators.result import Fit
from driftbook.estimators.status import Status
from driftbook.estimators.symmetric import Factor, factor
from driftbook.estimators.windows import Array, PairedTerms, window_maxima

SHORTEST = 10
COARSEST = 0.5
"""Largest |f′|Δ over a window's values up to which the likelihood is trusted."""

_TWO_SIDED = NormalDist().inv_cdf(0.975)
_LEAST_SHARE = 1e-7  # of a pivot that elimination leaves: coefficients are then good to 1e-6 of their standard errors
_KURTOSIS_LOSS = 1e-7  # largest loss left standing in the kurtosis, whose standard error is some √(24/n)
_NODES, _WEIGHTS = np.polynomial.legendre.leggauss(4)  # exact to degree seven, of which six is needed
_AT, _WEIGHT = 0.5 * (1 + _NODES), 0.5 * _WEIGHTS

SETTINGS = (
    Parameter("centre", "x", "Where z = 0; a setting of the series and lookback."),
    Parameter("scale", "x", "Length of z = 1; a setting of the series and lookback."),
)

PARAMETERS = (
    Parameter("a0", "x/t", "Drift at the centre."),
    Parameter("a1", "x/t", "Coefficient of z in the drift, z = (x - centre)/scale."),
    Parameter("a2", "x/t", "Coefficient of z² in the drift."),
    Parameter("a3", "x/t", "Coefficient of z³ in the drift: not negative, the drift does not confine."),
    Parameter("sigma", "x/√t", "Volatility."),
)

RESTING = {
    "bottom_lower": "Lower resting point: the bottom of the lower of two wells; empty where there are no two.",
    "barrier": "Top of the barrier between two wells; empty where there are no two.",
    "bottom_upper": "Upper resting point: the bottom of the upper of two wells; empty where there are no two.",
}


def _with_wald_ends(parameter: Parameter) -> tuple[Column, ...]:
    """The four columns of a parameter, with the ends of its interval as formulas."""
    name = parameter.name
    estimate, error, lower, upper = parameter_columns(parameter)
    reach = f"{_TWO_SIDED!r} * {name}_se"
    return estimate, error, replace(lower, sql=f"{name} - {reach}"), replace(upper, sql=f"{name} + {reach}")


COLUMNS = (
    *(Column(setting.name, setting.unit, setting.meaning) for setting in SETTINGS),
    *(column for parameter in PARAMETERS[:SIZE] for column in _with_wald_ends(parameter)),
    *parameter_columns(PARAMETERS[SIZE]),
    *(column for name, meaning in RESTING.items() for column in _with_wald_ends(Parameter(name, "x", meaning))),
    Column("steepest", "", "Largest |slope of the drift| times the longest step, over the window's range."),
    Column("kurtosis", "", "Fourth moment of the residuals over the squared second: 3 for a Gaussian."),
    Column("loglik", "", "Log-likelihood of the observations after the first, given the first."),
)

_COEFFICIENTS = tuple(parameter.name for parameter in PARAMETERS[:SIZE])


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


def fit_piece(piece: Piece) -> Answer:
    """Fit every window of a piece; see `driftbook.estimators.batches`."""
    levels, after = piece.by_step(piece.x[:, :-1]), piece.by_step(piece.x[:, 1:])
    d = piece.by_step(piece.x[:, 1:] - piece.x[:, :-1])
    steps = piece.dt[..., None] if piece.steps is None else piece.by_step(piece.steps)
    origin = levels[..., piece.pivot : piece.pivot + 1]
    x, y = levels - origin, after - origin
    sums = Sums.of(piece.lookback, list(_summed(piece, likelihood_terms(x, y, d, steps), TERMS)))
    optimum = maximise(sums)
    place = Place(piece.of_windows(origin), None, *_range(piece, x, y), _longest(piece))
    residuals = None
    if piece.intervals:
        rates = RateSums.of(_summed(piece, residual_terms(x, d, steps), RESIDUAL_TERMS))
        residuals = rates.residuals(optimum.drift)
    columns, status = _estimates(sums, optimum, place, residuals)
    doubtful = np.flatnonzero(~_is_sound(sums, optimum, place, residuals))
    if doubtful.size:
        repair(piece, doubtful, partial(_from_windows, piece.intervals), columns, status)
    return Answer(columns, status)


def _summed(piece: Piece, terms: Iterable[Array], count: int) -> Array:
    """Sums of so many terms over every window, shape (count, m)."""
    room = PairedTerms((*piece.dt.shape, piece.offsets + piece.lookback - 1 - piece.skip), count)
    for part, term in zip(room.parts, terms, strict=True):
        part[...] = term
    found = np.empty((count, *piece.shape))
    for row, total in zip(found, room.sums(piece.lookback, piece.skip), strict=True):
        row[...] = total
    return found.reshape(count, -1)


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


def _is_sound(sums: Sums, optimum: Optimum, place: Place, residuals: Residuals | None) -> Mask:
    """Whether sums kept their digits, and hold more than rounding; NaN compares as false."""
    loss = 4 * EPS * sums.n**0.5 / LOSS
    unexplained = 2 * optimum.unexplained
    sound: Mask = optimum.converged & (optimum.share > _LEAST_SHARE) & np.isfinite(optimum.loglik)
    sound &= (unexplained > loss * sums.squares) & (sums.squares > SMALLEST) & (sums.squares < LARGEST)
    level = np.abs(place.origin) + np.maximum(place.high, -place.low)
    sound &= unexplained * sums.plain[0] > 4 * sums.n**2 * np.square(ROUNDING * level)
    if residuals is not None:
        sound &= residuals.fourth > 4 * EPS * sums.n**0.5 / _KURTOSIS_LOSS * residuals.size
    return sound


def _estimates(sums: Sums, optimum: Optimum, place: Place, residuals: Residuals | None) -> tuple[Columns, Statuses]:
    """Columns and status of windows, shape (m,); all of them with residuals."""
    unit = np.ones(1) if place.unit is None else place.unit
    drift = optimum.drift if sums.rate is None else _with_rate(optimum.drift, sums.rate)
    rows = _to_powers_of_z(place.origin, unit)
    sigma = unit * np.sqrt(optimum.variance)
    columns = {name: _dot(row, drift) for name, row in zip(_COEFFICIENTS, rows, strict=True)}
    columns |= {"sigma": sigma, "loglik": optimum.loglik - sums.n * np.log(unit)}
    steepest = cubic.steepest(drift, place.low, place.high) * place.longest
    if residuals is not None:
        covariance = _Covariance.of(sums, optimum, residuals)
        errors = covariance.errors([np.stack(np.broadcast_arrays(*entries)) for entries in zip(*rows, strict=True)])
        columns |= {f"{name}_se": error for name, error in zip(_COEFFICIENTS, errors, strict=True)}
        columns |= {"steepest": steepest, "kurtosis": covariance.kurtosis}
        columns |= _of_sigma(sums.n, sigma, optimum, covariance.kurtosis)
        columns |= _resting_points(drift, covariance, place.origin, unit)
        for name in (*_COEFFICIENTS, *RESTING):
            reach = _TWO_SIDED * columns[f"{name}_se"]
            columns |= {f"{name}_lower": columns[name] - reach, f"{name}_upper": columns[name] + reach}
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


def _dot(row: Sequence[Array], values: Sequence[Array] | Array) -> Array:
    total = row[0] * values[0]
    for left, right in zip(row[1:], values[1:], strict=True):
        total = total + left * right
    return total


@dataclass(frozen=True)
class _Covariance:
    """Of local coefficients: what gives standard errors of linear functions of them."""

    n: int
    factor: Factor
    variance: Array
    curvature: Array
    response: Array
    middle: Array
    kurtosis: Array

    @classmethod
    def of(cls, sums: Sums, optimum: Optimum, residuals: Residuals) -> _Covariance:
        """With the residuals' squares brought to the size of sigma²."""
        variance = residuals.squares[0] / sums.plain[0]
        kurtosis = residuals.fourth / (sums.n * variance * variance)
        middle = residuals.squares * (optimum.variance / variance)
        solved = factor(sums.matrix(optimum.variance), SIZE)
        return cls(sums.n, solved, optimum.variance, optimum.curvature, optimum.response, middle, kurtosis)

    def take(self, places: Places) -> _Covariance:
        """Of some of the windows."""
        solved, middle = self.factor.take(places), self.middle[:, places]
        of_sigma = self.variance[places], self.curvature[places], self.response[:, places]
        return _Covariance(self.n, solved, *of_sigma, middle, self.kurtosis[places])

    def errors(self, row: Sequence[Array]) -> Array:
        """Standard errors of rows · coefficients, shape (k, m): the larger of the information's and the sandwich's.

        A row is given by its four entries, each of shape (k, m).
        """
        weights = self.factor.solve(row)
        by_information = self.variance * _dot(row, weights)
        sandwich = np.zeros_like(by_information)
        for j, left in enumerate(weights):
            along = left * self.middle[2 * j]
            for k in range(j):
                along = along + 2 * weights[k] * self.middle[j + k]
            sandwich += left * along
        with_sigma = np.square(_dot(row, self.response)) / self.curvature
        return np.asarray(np.sqrt((np.maximum(by_information, sandwich) + with_sigma) * (self.n / (self.n - SIZE))))


def _of_sigma(n: int, sigma: Array, optimum: Optimum, kurtosis: Array) -> Columns:
    """Standard error and interval, on ln sigma: centred for the parameters of the drift, and wider with fat tails."""
    by_information = 0.25 / optimum.curvature
    own = np.maximum(1 / (2 * (n - SIZE)), (kurtosis - 1) / (4 * n))
    reach = _TWO_SIDED * np.sqrt(own + np.maximum(by_information - 1 / (2 * n), 0.0))
    centre = sigma * np.sqrt(n / (n - SIZE))
    return {
        "sigma_se": sigma * np.sqrt(by_information),
        "sigma_lower": centre * np.exp(-reach),
        "sigma_upper": centre * np.exp(reach),
    }


def _resting_points(drift: Array, covariance: _Covariance, origin: Array, unit: Array) -> Columns:
    """Where the drift vanishes, if it has two wells, with standard errors by the delta method."""
    columns = {f"{name}{end}": np.full(drift[0].shape, np.nan) for name in RESTING for end in ("", "_se")}
    roots = cubic.three_roots(drift)
    places = np.flatnonzero((drift[3] < 0) & np.isfinite(roots[0]))
    if places.size:
        some, z = drift[:, places], np.stack([root[places] for root in roots])
        errors = covariance.take(places).errors([np.ones_like(z), z, z * z, z * z * z])
        size = np.broadcast_to(unit, origin.shape)[places]
        errors *= size / np.abs(cubic.slope(some, z))
        for name, place, error in zip(RESTING, origin[places] + size * z, errors, strict=True):
            columns[name][places], columns[f"{name}_se"][places] = place, error
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
    sums = Sums.of(n, [term.sum(axis=1) for term in likelihood_terms(x, y, beyond, steps)], rate)
    optimum = maximise(sums)
    place = Place(origin, unit, local.min(axis=1), local.max(axis=1), steps.max(axis=1))
    residuals = None
    if intervals:
        rates = RateSums.of(np.stack([term.sum(axis=1) for term in residual_terms(x, beyond, steps)]))
        residuals = rates.residuals(optimum.drift)
    columns, status = _estimates(sums, optimum, place, residuals)
    rounding = np.square(ROUNDING * windows / unit[:, None]).sum(axis=1)
    least = n * rounding / sums.plain[0]
    flat = (largest == 0) | (sums.squares <= least) | (optimum.converged & (2 * optimum.unexplained <= least))
    lost = ~flat & ~(optimum.converged & (optimum.share > EPS * n) & np.isfinite(optimum.loglik))
    status[flat], status[lost] = Status.FLAT, Status.NOT_CONVERGED
    blank(columns, np.flatnonzero(flat | lost))
    return columns, status


def log_density(
    x: Array,
    steps: Array,
    centre: Array,
    scale: Array,
    a0: Array,
    a1: Array,
    a2: Array,
    a3: Array,
    sigma: Array,
) -> Array:
    """Log-likelihood of windows, shape (..., n + 1), at given parameters."""
    f = [each[..., None] / scale[..., None] for each in (a0, a1, a2, a3)]
    z = (x - centre[..., None]) / scale[..., None]
    before, d, u = z[..., :-1], np.diff(x, axis=-1) / scale[..., None], np.square(sigma / scale)[..., None]
    terms = -0.5 * np.log(2 * np.pi * u * steps)
    for v, weight in zip(_AT, _WEIGHT, strict=True):
        t = before + v * d
        drift, slope, bend = cubic.value(f, t), cubic.slope(f, t), 2 * f[2] + 6 * f[3] * t
        curved = 2 * (slope * slope + drift * bend) + 6 * u * f[3]
        terms = terms - weight * 0.5 * steps * (np.square(d / steps - drift) / u + slope)
        terms = terms - weight * 0.25 * steps * steps * v * (1 - v) * curved
    loglik = terms.sum(axis=-1) - x.shape[-1] * np.log(scale) + np.log(scale)
    return np.where((sigma > 0) & (scale > 0), loglik, np.nan)


@dataclass(frozen=True)
class Quartic(Model):
    """The model, whose fits need a centre and a scale: see the top of this file."""

    @property
    def settings(self) -> tuple[Parameter, ...]:
        """What goes before the parameters in functions, and is not estimated."""
        return SETTINGS

    def fit(
        self,
        x: ArrayLike,
        dt: ArrayLike,
        *,
        intervals: bool = True,
        threads: int = 1,
        centre: ArrayLike | None = None,
        scale: ArrayLike | None = None,
    ) -> Fit:
        """`Model.fit`, with a centre and scale (x), shape () or (...); by default each window's mean and sd."""
        values = np.asarray(x)
        if values.ndim < 1 or values.shape[-1] < 2:
            return super().fit(x, dt, intervals=intervals, threads=threads)
        lookback = values.shape[-1] - 1
        fit = self.rolling(x, dt, lookback, intervals=intervals, threads=threads, centre=centre, scale=scale)
        columns = {name: found[..., 0] for name, found in fit.columns.items()}
        return Fit(self.name, fit.n[..., 0], columns, fit.status[..., 0])

    def rolling(
        self,
        x: ArrayLike,
        dt: ArrayLike,
        lookback: int,
        *,
        intervals: bool = True,
        threads: int = 1,
        first: int = 0,
        centre: ArrayLike | None = None,
        scale: ArrayLike | None = None,
    ) -> Fit:
        """`Model.rolling`, with a centre and scale (x), shape () or (...).

        By default those of each series are the mean and the standard deviation of its first lookback + 1 finite
        values (0 and 1 where it has none, a scale of 1 where they do not vary), whatever `first` is.

        Raises
        ------
        ValueError, TypeError
            As `Model.rolling`, and if the centre is not finite, or the scale not finite and positive.
        """
        values = np.asarray(x)
        if values.dtype.kind not in "fiu" or values.ndim < 1:
            return super().rolling(x, dt, lookback, intervals=intervals, threads=threads, first=first)
        values = values.astype(np.float64, copy=False)
        shape = values.shape[:-1]
        usual = _first_window(values, lookback)
        at = _setting("centre", usual[0] if centre is None else centre, shape)
        size = _setting("scale", usual[1] if scale is None else scale, shape)
        if (size <= 0).any():
            raise ValueError("scale must be positive")
        with np.errstate(all="ignore"):
            z = (values - at[..., None]) / size[..., None]
        fit = super().rolling(z, dt, lookback, intervals=intervals, threads=threads, first=first)
        found = _in_units_of_x(fit, at[..., None], size[..., None], intervals=intervals)
        return _without_rounding(found, values, float(np.max(dt, initial=0.0)), lookback, first)

    def settings_of(self, x: ArrayLike, lookback: int) -> tuple[Array, ...]:
        """Centre and scale: mean and standard deviation of the first lookback + 1 finite values."""
        return _first_window(np.asarray(x, dtype=np.float64), lookback)

    def rolling_by(
        self, settings: Sequence[ArrayLike], x: ArrayLike, dt: ArrayLike, lookback: int, *, first: int = 0
    ) -> Fit:
        """`rolling` by a centre and a scale."""
        centre, scale = settings
        return self.rolling(x, dt, lookback, first=first, centre=centre, scale=scale)


def _setting(name: str, given: ArrayLike, shape: tuple[int, ...]) -> Array:
    values = np.asarray(given, dtype=np.float64)
    if not np.isfinite(values).all():
        raise ValueError(f"{name} must be finite")
    return np.broadcast_to(values, shape)


def _first_window(x: Array, lookback: int) -> tuple[Array, Array]:
    """Mean and standard deviation of the first lookback + 1 finite values of each series, shape (...)."""
    usable = np.isfinite(x)
    usable &= np.cumsum(usable, axis=-1) <= lookback + 1
    count = np.maximum(usable.sum(axis=-1), 1)
    with np.errstate(all="ignore"):
        origin = np.where(usable, x, 0.0).sum(axis=-1) / count
        away = np.where(usable, x - origin[..., None], 0.0)
        lost = away.sum(axis=-1) / count
        scale = np.sqrt(np.square(away).sum(axis=-1) / count)
    return origin + lost, np.where((scale > 0) & np.isfinite(scale), scale, 1.0)


def _in_units_of_x(fit: Fit, centre: Array, scale: Array, *, intervals: bool) -> Fit:
    """A fit to z as one to x."""
    shape, columns = fit.status.shape, dict(fit.columns)
    names = (
        [column.name for column in COLUMNS if column.unit.startswith("x")] if intervals else [*_COEFFICIENTS, "sigma"]
    )
    for name in names:
        columns[name] = columns[name] * scale
    if intervals:
        for name in RESTING:
            columns[name] = columns[name] + centre
        for name in (*_COEFFICIENTS, *RESTING):  # to the bit what their SQL gives
            reach = _TWO_SIDED * columns[f"{name}_se"]
            columns |= {f"{name}_lower": columns[name] - reach, f"{name}_upper": columns[name] + reach}
    columns["loglik"] = columns["loglik"] - fit.n * np.log(scale)
    known = np.isfinite(columns["sigma"])
    columns["centre"] = np.where(known, np.broadcast_to(centre, shape), np.nan)
    columns["scale"] = np.where(known, np.broadcast_to(scale, shape), np.nan)
    return Fit(fit.model, fit.n, columns, fit.status)


def _without_rounding(fit: Fit, x: Array, longest: float, lookback: int, first: int) -> Fit:
    """The fit with those windows flat that move by no more than the rounding of x, of which z no longer tells."""
    largest = np.abs(np.where(np.isfinite(x), x, 0.0)).max(axis=-1, initial=0.0)[..., None]
    tiny = fit.columns["sigma"] * np.sqrt(longest) <= 4 * ROUNDING * largest
    places = np.flatnonzero(tiny | (fit.status == Status.NOT_CONVERGED))
    if not places.size:
        return fit
    windows = np.lib.stride_tricks.sliding_window_view(x, lookback + 1, axis=-1)[..., first:, :]
    flat = np.zeros(fit.status.size, dtype=np.bool_)
    at_once = max(1, GATHERED // (lookback + 1))
    for start in range(0, places.size, at_once):
        part = places[start : start + at_once]
        window = windows[np.unravel_index(part, fit.status.shape)]
        d = np.diff(window, axis=-1)
        moved = np.square(d - d.mean(axis=-1, keepdims=True)).sum(axis=-1)
        flat[part] = moved <= np.square(2 * ROUNDING * window).sum(axis=-1)
    found = flat.reshape(fit.status.shape)
    columns = {name: np.where(found, np.nan, values) for name, values in fit.columns.items()}
    return Fit(fit.model, fit.n, columns, np.where(found, np.int8(Status.FLAT), fit.status))


MODEL = Quartic(
    name="quartic",
    revision=1,
    equation="dX = (a0 + a1 z + a2 z² + a3 z³) dt + sigma dW, z = (X - centre)/scale",
    range="real",
    has_pull=True,
    is_relative=False,
    local_volatility=("sigma", "sigma_lower", "sigma_upper"),
    local_drift="a0 + (x - centre) / scale * (a1 + (x - centre) / scale * (a2 + (x - centre) / scale * a3))",
    reaches_zero=True,
    steps="any",
    shortest=SHORTEST,
    parameters=PARAMETERS,
    columns=COLUMNS,
    kernel=fit_piece,
    log_density=log_density,
)
