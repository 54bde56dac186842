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

Standard errors and intervals are those of `driftbook.estimators.cubic_uncertainty`. The interval of sigma is on ln
sigma, with the kurtosis of movements, and holds the truth in 93 to 96 % of windows of 60 to 1000 steps. Those of a0 …
a3 take the law of their errors from a table, since like kappa of the Ornstein–Uhlenbeck process the drift is estimated
as too strong a pull in windows of few crossings: ± 1.96 standard errors hold the truth in as little as 78 % of them.
Share of intervals that held the truth, daily steps, centre 0 and scale 1, 1000 windows each, none of which the table
was made of (drifts in powers of x; the last is a random walk):

==============================  =====  ====  ====  ====  ====
truth                           n      a0    a1    a2    a3
==============================  =====  ====  ====  ====  ====
8 (x − x³), sigma 1.5           60     0.93  0.92  0.93  0.94
…                               250    0.96  0.96  0.98  0.98
…                               1000   0.97  0.95  0.98  0.96
…                               2500   0.97  0.96  0.96  0.95
1 + 30 (x − x³), sigma 3        60     0.96  0.95  0.97  0.98
…                               250    0.97  0.96  0.97  0.98
…                               1000   0.96  0.95  0.96  0.95
…                               2500   0.96  0.93  0.96  0.92
−5 (x + x³), sigma 1            60     0.96  0.94  0.95  0.93
…                               250    0.99  0.98  0.97  0.97
…                               1000   0.98  0.97  0.97  0.98
…                               2500   0.97  0.97  0.97  0.98
−10 x³, sigma 1                 250    0.97  0.97  0.97  0.97
…                               1000   1.00  0.98  0.99  0.99
0.5 − 25 x, sigma 1             60     0.99  0.94  0.97  0.95
…                               2500   0.93  0.95  0.94  0.97
0, sigma 1                      60     0.93  0.94  0.94  0.93
…                               250    0.93  0.94  0.94  0.92
…                               1000   0.93  0.94  0.93  0.91
…                               2500   0.92  0.94  0.94  0.91
==============================  =====  ====  ====  ====  ====

Most of the windows of 60 steps are `too_coarse` for the drift that is found. A resting point has ends where its slope
is sure, and the bottoms only where the barrier has one: a cubic has three roots in many windows that saw one well.

The ice core of the tests (temperature over 800,000 years, every half thousand) has two wells by Euler's least squares,
with roots at −7.24, −1.42 and −0.42, and one by this likelihood. The Fokker–Planck equation, solved exactly and
maximised, takes its side: its roots are −7.21 and −0.81 ± 0.19 i, its coefficients within a hundredth of a standard
error of these, and at Euler's estimates its log-likelihood is 0.95 lower. Over steps that long Euler's scheme takes the
drift for its average over the step; the upper well is its doing, and in either case far inside the errors.

References
----------
Langevin, P. (1908), Sur la théorie du mouvement brownien, Comptes rendus 146, 530–533. Aït-Sahalia, Y. (2002), Maximum
likelihood estimation of discretely sampled diffusions: a closed-form approximation approach, Econometrica 70, 223–262.
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np
from numpy.typing import ArrayLike

from driftbook.estimators import cubic
from driftbook.estimators.cubic_fit import COEFFICIENTS, RESTING, fit_piece
from driftbook.estimators.model import Column, Model, Parameter, parameter_columns
from driftbook.estimators.regression import ROUNDING
from driftbook.estimators.repair import GATHERED
from driftbook.estimators.result import Fit
from driftbook.estimators.status import Status
from driftbook.estimators.windows import Array

SHORTEST = 10

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

_OF_TWO_WELLS = (
    "Lower resting point: the bottom of the lower of two wells; empty where there are no two.",
    "Top of the barrier between two wells; empty where there are no two.",
    "Upper resting point: the bottom of the upper of two wells; empty where there are no two.",
)
_PLACES = tuple(Parameter(name, "x", meaning) for name, meaning in zip(RESTING, _OF_TWO_WELLS, strict=True))

COLUMNS = (
    *(Column(setting.name, setting.unit, setting.meaning) for setting in SETTINGS),
    *(column for parameter in (*PARAMETERS, *_PLACES) for column in parameter_columns(parameter)),
    Column("steepest", "", "Largest |slope of the drift| times the longest step, over the window's range."),
    Column("kurtosis", "", "Fourth moment of movements over their squared second: 3 for a Gaussian."),
    Column("loglik", "", "Log-likelihood of the observations after the first, given the first."),
)


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
        [column.name for column in COLUMNS if column.unit.startswith("x")] if intervals else [*COEFFICIENTS, "sigma"]
    )
    for name in names:
        columns[name] = columns[name] * scale
    for name in RESTING:
        if intervals:
            for each in (name, f"{name}_lower", f"{name}_upper"):
                columns[each] = columns[each] + centre
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
