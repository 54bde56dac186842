"""SQL of what a model says at a window's last value: volatility and drift, relative for series of prices."""

from __future__ import annotations

from driftbook.estimators import Model

_PULL = ("half_life", "half_life_lower", "half_life_upper")


def local_columns(model: Model) -> dict[str, str]:
    """Pieces of SQL over a model's columns and value, sign, shift and days, each for its place in a query.

    A model of X > 0 is fitted to X + shift and speaks in fractions of that; relative to X they are larger by
    (X + shift)/X. Where a series of prices is not above zero, nothing is relative to it.
    """
    there = {column.name for column in model.columns}
    of_value = "x" if model.is_relative else "1"
    names = ("volatility", "volatility_lower", "volatility_upper")
    return {
        "model": model.name,
        "x": "case when value + shift > 0 then value + shift end" if model.range == "positive" else "value",
        "scale": f"case when sign <> 'positive' then 1.0 when value > 0 then {of_value} / value end",
        "volatility": ", ".join(
            f"({sql}) * scale as {name}" for sql, name in zip(model.local_volatility, names, strict=True)
        ),
        "drift": f"({model.local_drift}) * scale as drift",
        "pull": ", ".join(
            f"{name} * days as {name}_days" if name in there else f"null::double as {name}_days" for name in _PULL
        ),
    }
