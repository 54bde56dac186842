"""Invented series of an island utility, and plans for them."""

from datetime import datetime, timedelta

import polars as pl

from driftbook.store.plan import PlanText, parse_plan

FIRST_DAY = datetime(2024, 1, 1)


def plan_text(
    lookbacks: dict[str, list[int]],
    periods: float = 252.0,
    name: str = "desk",
    models: tuple[str, ...] = ("ou",),
    also_called: dict[str, str] | None = None,
) -> PlanText:
    """A plan of some models on some series, each with its lookbacks and perhaps another name."""
    other = {one: f'also_called = ["{called}"]\n' for one, called in (also_called or {}).items()}
    series = "".join(
        f'[[series]]\nname = "{one}"\nsign = "positive"\nperiods_per_year = {periods}\n{other.get(one, "")}'
        for one in lookbacks
    )
    estimates = "".join(
        f'[[estimate]]\nseries = ["{one}"]\nmodels = {list(models)}\nlookbacks = {steps}\n'
        for one, steps in lookbacks.items()
    )
    return parse_plan(f'name = "{name}"\n{series}{estimates}', "the test's plan")


def days(series: str, values: list[float | None], first: int = 0) -> pl.DataFrame:
    """A frame of one value a day, from the day numbered `first` on."""
    times = [FIRST_DAY + timedelta(days=first + day) for day in range(len(values))]
    return pl.DataFrame(
        {"series": [series] * len(values), "time": times, "value": values},
        schema={"series": pl.String, "time": pl.Datetime("us"), "value": pl.Float64},
    )


def wave(count: int, level: float = 100.0, first: int = 0) -> list[float]:
    """Values that swing about a level without ever repeating a window."""
    return [level + ((7 * k * k + 3 * k) % 23) / 4 - ((5 * k) % 11) / 8 for k in range(first, first + count)]
