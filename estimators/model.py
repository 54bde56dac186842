"""What a model is: its name, its columns with their units, and how it fits a batch of windows."""

from __future__ import annotations

import operator
from collections.abc import Callable, Sequence
from dataclasses import dataclass
from functools import cached_property
from typing import Literal

import numpy as np
from numpy.typing import ArrayLike, NDArray

from driftbook.estimators.batches import Kernel, in_pieces
from driftbook.estimators.result import Fit
from driftbook.estimators.status import Status
from driftbook.estimators.stepping import EQUAL_STEPS
from driftbook.estimators.windows import Array

Loglik = Callable[..., Array]
"""Of x, shape (..., n + 1), steps, which broadcast to (..., n), and parameters of shape (...): the log-likelihood."""


@dataclass(frozen=True)
class Parameter:
    """A parameter of a model.

    Attributes
    ----------
    name : str
    unit : str
        In x, the unit of the series, and t, the unit of its clock (a year or a second); empty for a pure number.
    meaning : str
        One sentence.
    """

    name: str
    unit: str
    meaning: str


@dataclass(frozen=True)
class Column:
    """A column of a model's fits.

    Attributes
    ----------
    name : str
    unit : str
        As in `Parameter`.
    meaning : str
        One sentence, fit for a comment on the column.
    sql : str or None
        For a column that is a formula of stored ones: that formula, in SQL over stored columns of this model. None
        for a column that is stored.
    kind : "double", "boolean" or "word"
        In a `Fit` a boolean is 1.0, 0.0 or NaN, and a word its place in `words`, or NaN.
    words : tuple of str
        For a column of words: those that there are.
    """

    name: str
    unit: str
    meaning: str
    sql: str | None = None
    kind: Literal["double", "boolean", "word"] = "double"
    words: tuple[str, ...] = ()


def parameter_columns(parameter: Parameter) -> tuple[Column, ...]:
    """The four columns of a parameter: estimate, standard error, and the ends of its 95 % interval."""
    name, unit = parameter.name, parameter.unit
    return (
        Column(name, unit, parameter.meaning),
        Column(f"{name}_se", unit, f"Standard error of {name}."),
        Column(f"{name}_lower", unit, f"Lower end of the 95 % interval of {name}; empty: no end on this side."),
        Column(f"{name}_upper", unit, f"Upper end of the 95 % interval of {name}; empty: no end on this side."),
    )


@dataclass(frozen=True)
class Model:
    """A model of a series, and how to fit it to many windows at once.

    Attributes
    ----------
    name : str
    revision : int
        Rises whenever the same data give other numbers.
    equation : str
        The model's equation in plain text.
    range : "real" or "positive"
        Which values it can take.
    has_pull : bool
        Whether its drift leads back to a level, or to one of several.
    is_relative : bool
        Whether `local_volatility` and `local_drift` are fractions of the value rather than in its units.
    local_volatility : tuple of three str
        Volatility at the last value of a window, and the ends of its 95 % interval: SQL over stored columns, `step`,
        the mean step, and `x`, the last value (of the series plus its shift, for a model of positive values).
    local_drift : str
        Expected change per unit of time at the last value: SQL, likewise.
    reaches_zero : bool or None
        Whether its paths reach zero; None if that depends on the parameters, and a column of the fit tells it.
    steps : "equal" or "any"
        Which steps between observations it can fit.
    shortest : int
        Fewest steps in a window; shorter ones are `Status.TOO_SHORT`.
    parameters : tuple of Parameter
    columns : tuple of Column
        All columns of a fit, in order.
    kernel : callable
        Fits one piece of a batch; see `driftbook.estimators.batches`.
    log_density : callable
        What `loglik` calls with checked arguments.
    of_logs : Model or None
        The same model of the logarithm, for series of positive values; None where there is none.
    """

    name: str
    revision: int
    equation: str
    range: Literal["real", "positive"]
    has_pull: bool
    is_relative: bool
    local_volatility: tuple[str, str, str]
    local_drift: str
    reaches_zero: bool | None
    steps: Literal["equal", "any"]
    shortest: int
    parameters: tuple[Parameter, ...]
    columns: tuple[Column, ...]
    kernel: Kernel
    log_density: Loglik
    of_logs: Model | None = None

    @property
    def settings(self) -> tuple[Parameter, ...]:
        """What goes before the parameters in functions, belongs to a series and a lookback, and is not estimated."""
        return ()

    @property
    def stored(self) -> tuple[Column, ...]:
        """Columns that are kept as numbers."""
        return tuple(column for column in self.columns if column.sql is None)

    @cached_property
    def has_half_life(self) -> bool:
        """Whether a distance to its level halves in a time of its own."""
        return any(column.name == "half_life" for column in self.columns)

    @cached_property
    def tests_pull(self) -> bool:
        """Whether a fit tells a p-value of no pull."""
        return any(column.name == "no_reversion_p" for column in self.columns)

    @property
    def derived(self) -> tuple[Column, ...]:
        """Columns that are formulas of stored ones."""
        return tuple(column for column in self.columns if column.sql is not None)

    def fit(self, x: ArrayLike, dt: ArrayLike, *, intervals: bool = True, threads: int = 1) -> Fit:
        """Fit each window of a batch.

        Parameters
        ----------
        x : array_like, shape (..., n + 1)
            Windows of n steps, time last.
        dt : array_like, shape (), (...) or (..., n)
            The step, in the clock's unit of time: one for all, one a window, or one a step.
        intervals : bool
            Without them only parameters and the log-likelihood are computed, in a fraction of the time; every other
            column, standard errors too, is NaN.
        threads : int
            Threads to spread the work over. The bits do not depend on it.

        Returns
        -------
        Fit
            Arrays of shape (...).

        Raises
        ------
        ValueError, TypeError
            As `rolling`.
        """
        x = _series(x)
        lookback = x.shape[-1] - 1
        if lookback < 1:
            _threads(threads)
            _steps(dt, x)
            return self._too_short(max(lookback, 0), x.shape[:-1])
        fit = self.rolling(x, dt, lookback, intervals=intervals, threads=threads)
        columns = {name: values[..., 0] for name, values in fit.columns.items()}
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
    ) -> Fit:
        """Fit every window of series, in rolling position.

        Parameters
        ----------
        x : array_like, shape (..., n_obs)
            Series, time last. Integers and narrow floats are computed in float64.
        dt : array_like, shape (), (...) or (..., n_obs - 1)
            The step, in the clock's unit of time: one for all, one a series, or one a step.
        lookback : int
            Steps in a window.
        intervals : bool
            Without them only parameters and the log-likelihood are computed, in a fraction of the time; every other
            column, standard errors too, is NaN.
        threads : int
            Threads to spread the work over. The bits do not depend on it.
        first : int
            The first window that is wanted: earlier ones cost next to nothing and are not returned. The bits of the
            others do not depend on it.

        Returns
        -------
        Fit
            Arrays of shape (..., windows) with windows = max(n_obs - lookback - first, 0); entry k is of the window
            that holds the observations first + k … first + k + lookback. Data never raise: what can't be fitted has
            a status and NaN.

        Raises
        ------
        ValueError
            If `x` has no time axis, `lookback` or `threads` is below 1, `first` below 0, or `dt` is not positive,
            not finite, of another shape, or unequal for a model that fits equal steps only.
        TypeError
            If `x` or `dt` are no real numbers, or `lookback`, `threads` or `first` no integer.
        """
        x, lookback, threads, first = _series(x), _lookback(lookback), _threads(threads), _first(first)
        steps = _one_a_series(_steps(dt, x))
        if self.steps == "equal" and not _are_equal(steps):
            raise ValueError(f"dt has unequal steps, which {self.name} can't fit")
        batch, n_windows = x.shape[:-1], max(x.shape[-1] - lookback - first, 0)
        shape = (*batch, n_windows)
        if lookback < self.shortest or 0 in shape:
            return self._too_short(lookback, shape)
        rows = x.reshape(-1, x.shape[-1])
        steps = np.broadcast_to(steps, (*batch, steps.shape[-1])).reshape(len(rows), -1)
        found, status = in_pieces(self.kernel, rows, steps, lookback, intervals=intervals, threads=threads, first=first)
        columns = {c.name: found[c.name].reshape(shape) if c.name in found else _nothing(shape) for c in self.columns}
        return Fit(self.name, _count(lookback, shape), columns, status.reshape(shape))

    def settings_of(self, x: ArrayLike, lookback: int) -> tuple[Array, ...]:
        """The settings that a model would give series, shape (..., n_obs), from their first window; arrays (...)."""
        del x, lookback
        return ()

    def rolling_by(
        self, settings: Sequence[ArrayLike], x: ArrayLike, dt: ArrayLike, lookback: int, *, first: int = 0
    ) -> Fit:
        """`rolling` by given settings, in the order of `Model.settings`, each of shape () or (...)."""
        del settings
        return self.rolling(x, dt, lookback, first=first)

    def loglik(self, x: ArrayLike, dt: ArrayLike, *parameters: ArrayLike) -> Array:
        """Log-likelihood of windows at given parameters: log p(x_1 … x_n | x_0), in the series' own unit.

        Parameters
        ----------
        x : array_like, shape (..., n + 1)
            Windows of n steps, time last.
        dt : array_like, shape (), (...) or (..., n)
            The step, as in `fit`.
        *parameters : array_like
            The model's settings and parameters, in its order; they broadcast with the windows.

        Returns
        -------
        array
            NaN where the model gives no density: values outside its range, a volatility that is not positive, or no
            step at all.

        Raises
        ------
        ValueError
            If there are more or fewer parameters than the model has, or shapes that do not fit.
        TypeError
            If an argument is no array of real numbers.
        """
        x = _series(x)
        steps = _steps(dt, x)
        names = [parameter.name for parameter in (*self.settings, *self.parameters)]
        if len(parameters) != len(names):
            raise ValueError(f"{self.name} has the parameters {', '.join(names)}; got {len(parameters)} numbers")
        given = [_numbers(values, name) for values, name in zip(parameters, names, strict=True)]
        shape = np.broadcast_shapes(x.shape[:-1], *(values.shape for values in given))
        if x.shape[-1] < 2:
            return np.full(shape, np.nan)
        with np.errstate(all="ignore"):
            found = self.log_density(x, steps, *given)
        return np.where(np.isfinite(found), found, np.nan)

    def _too_short(self, n: int, shape: Sequence[int]) -> Fit:
        columns = {column.name: _nothing(shape) for column in self.columns}
        return Fit(self.name, _count(n, shape), columns, np.full(shape, Status.TOO_SHORT, dtype=np.int8))


def _nothing(shape: Sequence[int]) -> Array:
    """NaN everywhere, in no memory; read-only."""
    return np.broadcast_to(np.float64(np.nan), tuple(shape))


def _count(n: int, shape: Sequence[int]) -> NDArray[np.int64]:
    """The same number everywhere, in no memory; read-only."""
    return np.broadcast_to(np.int64(n), tuple(shape))


def _numbers(values: ArrayLike, name: str) -> Array:
    array = np.asarray(values)
    if array.dtype.kind not in "fiu" and array.size:
        raise TypeError(f"{name} must hold real numbers, got {array.dtype}")
    return array.astype(np.float64, copy=False)


def _series(x: ArrayLike) -> Array:
    array = _numbers(x, "x")
    if array.ndim < 1:
        raise ValueError("x must have a time axis, got a single number")
    return array


def _lookback(lookback: int) -> int:
    if operator.index(lookback) < 1:
        raise ValueError(f"lookback must be 1 or more, got {lookback}")
    return operator.index(lookback)


def _first(first: int) -> int:
    if operator.index(first) < 0:
        raise ValueError(f"first must be 0 or more, got {first}")
    return operator.index(first)


def _threads(threads: int) -> int:
    if operator.index(threads) < 1:
        raise ValueError(f"threads must be 1 or more, got {threads}")
    return operator.index(threads)


def _steps(dt: ArrayLike, x: Array) -> Array:
    """Steps, checked: one a step, shape (..., n), or if each series has equal ones, one a series, shape (..., 1)."""
    steps = _numbers(dt, "dt")
    batch, n = x.shape[:-1], max(x.shape[-1] - 1, 0)
    if not (np.isfinite(steps) & (steps > 0)).all():
        raise ValueError("dt must be positive and finite")
    if steps.shape == (*batch, n):
        return steps
    if steps.shape in ((), batch):
        return steps[..., None]
    raise ValueError(f"dt must have shape (), {batch} or {(*batch, n)}, got {steps.shape}")


def _one_a_series(steps: Array) -> Array:
    """One step a series where all of each are the same, shape (..., 1)."""
    return steps[..., :1] if (steps == steps[..., :1]).all() else steps


def _are_equal(steps: Array) -> bool:
    return bool(not steps.size or (np.ptp(steps, axis=-1) <= EQUAL_STEPS * steps.min(axis=-1)).all())
