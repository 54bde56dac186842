"""SQL of what a model says at a window's last value: volatility and drift, relative for series of prices."""

from __future__ import annotations

from driftbook.estimators import Model
from driftbook.store.clocks import microseconds_per_unit

_PULL = ("half_life", "half_life_lower", "half_life_upper")
# the mean step of a window in the clock's unit
_STEP = (
    "coalesce(1 / periods_per_year, (epoch_us(window_end) - epoch_us(window_start)) "
    f"/ n / case clock when 'seconds' then {microseconds_per_unit('seconds')} "
    f"else {microseconds_per_unit('act365')} end)"
)
_SHIFTED = "case when value + shift > 0 then value + shift end"


def local_columns(model: Model) -> dict[str, str]:
    """Pieces of SQL over the columns of a model and of a series, value and days, each for its place in a query.

    A model of X > 0, or of ln X, is fitted to X + shift and speaks in fractions of that; relative to X they are larger
    by (X + shift)/X. Where a series of prices is not above zero, nothing is relative to it.
    """
    there = {column.name for column in model.columns}
    names = ("volatility", "volatility_lower", "volatility_upper")
    of_value = _by_fit(model, "x" if model.is_relative else "1", "x")
    drift = _by_fit(model, model.local_drift, model.of_logs.local_drift if model.of_logs else "")
    return {
        "model": model.name,
        "step": _STEP,
        "x": _by_fit(model, _SHIFTED if model.range == "positive" else "value", _SHIFTED),
        "per_value": f"case when sign <> 'positive' then 1.0 when value > 0 then {of_value} / value end",
        "volatility": ", ".join(
            f"({sql}) * per_value as {name}" for sql, name in zip(model.local_volatility, names, strict=True)
        ),
        "drift": f"({drift}) * per_value as drift",
        "pull": ", ".join(
            f"{name} * days as {name}_days" if name in there else f"null::double as {name}_days" for name in _PULL
        ),
        "reaches_zero": f"{_reaches_zero(model)} as reaches_zero",
    }


def _by_fit(model: Model, of_level: str, of_logs: str) -> str:
    """What holds for a fit to the level, and to the logarithm, of a model that knows both."""
    return of_level if model.of_logs is None else f"(case when fitted_on = 'log' then {of_logs} else {of_level} end)"


def _reaches_zero(model: Model) -> str:
    """Whether X reaches zero: what stays above zero is X + shift, which is shift when X is zero."""
    columns = {column.name: column.sql or column.name for column in model.columns}
    by_itself = f"({columns['can_reach_zero']})" if model.reaches_zero is None else str(model.reaches_zero).lower()
    if model.of_logs is not None:
        return _by_fit(model, by_itself, _of_shifted(str(model.of_logs.reaches_zero).lower()))
    return _of_shifted(by_itself) if model.range == "positive" else by_itself


def _of_shifted(by_itself: str) -> str:
    return f"(case when shift > 0 then true when shift < 0 then false else {by_itself} end)"
