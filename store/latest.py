"""What the book says of each series now: one row a series, written by the run that estimated it."""

from __future__ import annotations

from collections.abc import Iterable
from dataclasses import dataclass, fields, replace
from datetime import datetime
from itertools import groupby
from typing import Any

import duckdb
import numpy as np
import pyarrow as pa

from driftbook.estimators import MODELS, Model
from driftbook.estimators.compare import bic, weights
from driftbook.store.in_force import Candidate, Choice, choose
from driftbook.store.local_sql import local_columns
from driftbook.store.plan import Plan
from driftbook.store.runs import Run
from driftbook.store.series import Series
from driftbook.store.sql import query
from driftbook.store.work import Work

_DAYS_PER_YEAR = 365.0
_SECONDS_PER_DAY = 86_400.0
_PULL = ("half_life", "half_life_lower", "half_life_upper", "half_life_unbounded")
_NO_NUMBERS = {
    "flat": "no variation",
    "out_of_range": "a value outside the model's range",
    "alternating": "swings from step to step",
    "not_converged": "no fit found",
    "too_coarse": "steps too long for the model",
    "discrete": "too many unchanged values",
}
_MUCH_NOISE = 0.1  # share of the variance of a step above which a p-value that knows no noise is not to be trusted


@dataclass(frozen=True)
class Row:
    """One row of base.latest, without its run; None is NULL."""

    series_id: int
    observed_at: datetime
    value: float
    lookback: int
    window_end: datetime
    model: str | None
    model_weight: float | None
    volatility: float | None
    volatility_lower: float | None
    volatility_upper: float | None
    volatility_unit: str
    drift: float | None
    half_life_days: float | None
    half_life_days_lower: float | None
    half_life_days_upper: float | None
    half_life_unbounded: bool | None
    can_reach_zero: bool | None
    challenger: str | None
    note: str


@dataclass(frozen=True)
class _Fit:
    """One model's fit of a series' latest window, with what it says of volatility, drift and half-life there."""

    series_id: int
    observed_at: datetime
    value: float
    lookback: int
    window_start: datetime
    model: str
    n: int
    loglik: float | None
    status: str
    no_reversion_p: float | None
    volatility: float | None
    volatility_lower: float | None
    volatility_upper: float | None
    drift: float | None
    half_life: float | None
    half_life_lower: float | None
    half_life_upper: float | None
    half_life_unbounded: bool | None
    reaches_zero: bool | None
    noise_share: float | None
    criterion: float  # bic, NaN without numbers


_PLACES = {field.name: place for place, field in enumerate(fields(_Fit))}


def write_latest(run: Run, plan: Plan, work: Work, last: int) -> None:
    """Writes the rows of the series that this run estimated, and closes those of series that left the plan."""
    con = run.con
    marks = _Marks(con, last)
    before = {row.series_id: row for row in (Row(*values) for values in con.execute(query("latest_rows")).fetchall())}
    headline = _headlines(plan, work.series)
    asked = sorted(_touched(work, before, headline) & headline.keys())
    rows = [
        _row(list(group), work.series[series_id], before.get(series_id), marks)
        for series_id, group in groupby(_fits(con, asked, headline), key=lambda fit: fit.series_id)
    ]
    changed = [row for row in rows if row != before.get(row.series_id)]
    without = set(asked) - {row.series_id for row in rows}  # all its observations were withdrawn
    gone = [series_id for series_id in before if series_id not in headline or series_id in without]
    _put_in_force(con, changed, gone, run.stamp.run_id)


def _touched(work: Work, before: dict[int, Row], headline: dict[int, int]) -> set[int]:
    """The series of which the book may say something else now: estimated, less estimated, or by another lookback."""
    less = {series_id for model in work.models for series_id, _ in model.leaving}
    moved = {series_id for series_id, row in before.items() if row.lookback != headline.get(series_id)}
    return work.series_due | less | moved


class _Marks:
    """What happened within windows that people should look at: corrections, values that are not positive."""

    def __init__(self, con: duckdb.DuckDBPyConnection, last: int) -> None:
        self._corrected = _times(con.execute(query("corrected_since"), {"last": last}).fetchall())
        self._not_positive = _times(con.execute(query("not_positive")).fetchall())

    def corrections(self, fit: _Fit) -> int:
        """How many observations of the window were corrected or withdrawn since the last refresh."""
        return _within(self._corrected, fit)

    def not_positive(self, fit: _Fit) -> int:
        """How many values of the window are not positive though the series should be."""
        return _within(self._not_positive, fit)


def _times(rows: list[tuple[int, datetime]]) -> dict[int, list[datetime]]:
    found: dict[int, list[datetime]] = {}
    for series_id, observed_at in rows:
        found.setdefault(series_id, []).append(observed_at)
    return found


def _within(times: dict[int, list[datetime]], fit: _Fit) -> int:
    return sum(fit.window_start <= time <= fit.observed_at for time in times.get(fit.series_id, []))


def _fits(con: duckdb.DuckDBPyConnection, asked: list[int], headline: dict[int, int]) -> Iterable[_Fit]:
    """The fits of the latest window of some series, a series after the other, models in the registry's order."""
    con.register(
        "asked_headline",
        pa.table(
            {
                "series_id": pa.array(asked, pa.int32()),
                "lookback": pa.array([headline[one] for one in asked], pa.int32()),
            }
        ),
    )
    con.execute(query("find_headlines"))
    con.unregister("asked_headline")
    found = [fit for model in MODELS.values() for fit in _fits_of(model, con.execute(_local_sql(model)).fetchall())]
    con.execute("drop table headline")
    return sorted(found, key=lambda fit: fit.series_id)


def _fits_of(model: Model, rows: list[Any]) -> list[_Fit]:
    loglik = np.array([row[_PLACES["loglik"]] for row in rows], np.float64)
    n = np.where(np.isnan(loglik), np.nan, [row[_PLACES["n"]] for row in rows])
    criteria = bic(loglik, len(model.parameters), n).tolist()
    return [_Fit(*(*row, criterion)) for row, criterion in zip(rows, criteria, strict=True)]


def _headlines(plan: Plan, series: dict[int, Series]) -> dict[int, int]:
    """The lookback that `latest` speaks of, by series."""
    lookbacks: dict[str, list[int]] = {}
    for entry in plan.entries:
        lookbacks.setdefault(entry.series, []).append(entry.lookback)
    chosen = {
        name: plan.headline_lookback if plan.headline_lookback in there else there[0]
        for name, there in lookbacks.items()
    }
    return {one.series_id: chosen[one.name] for one in series.values() if one.name in chosen}


def _local_sql(model: Model) -> str:
    """The latest fits of one model, with what it says at the last value."""
    there = {column.name: column.sql or column.name for column in model.columns}
    told = ", ".join(f"({there[name]})" if name in there else "null" for name in _PULL)
    optional = {name: there.get(name, "null") for name in ("no_reversion_p", "noise_share")}
    return query("local_fits").format(
        **local_columns(model) | optional | {"pull": told},
    )


def _row(fits: list[_Fit], series: Series, before: Row | None, marks: _Marks) -> Row:
    setting = series.setting
    candidates = _candidates(fits)
    chosen = choose(candidates, setting.in_force, _choice(before))
    weight = dict(zip([fit.model for fit in fits], _weights(fits, candidates), strict=True))
    usable = {fit.model: fit for fit, one in zip(fits, candidates, strict=True) if one.is_usable}
    by_name = {fit.model: fit for fit in fits}
    first, named, fit = fits[0], by_name.get(chosen.model or ""), usable.get(chosen.model or "")
    pulled = _pulled(named, fit, usable, weight)
    days = 1 / _SECONDS_PER_DAY if setting.clock == "seconds" else _DAYS_PER_YEAR
    return Row(
        series_id=series.series_id,
        observed_at=first.observed_at,
        value=first.value,
        lookback=first.lookback,
        window_end=first.observed_at,
        model=chosen.model,
        model_weight=weight.get(chosen.model or ""),
        volatility=fit.volatility if fit else None,
        volatility_lower=fit.volatility_lower if fit else None,
        volatility_upper=fit.volatility_upper if fit else None,
        volatility_unit=_volatility_unit(series),
        drift=fit.drift if fit else None,
        half_life_days=_scaled(pulled.half_life, days) if pulled else None,
        half_life_days_lower=_scaled(pulled.half_life_lower, days) if pulled else None,
        half_life_days_upper=_scaled(pulled.half_life_upper, days) if pulled else None,
        half_life_unbounded=pulled.half_life_unbounded if pulled else None,
        can_reach_zero=named.reaches_zero if named and setting.sign == "positive" else None,
        challenger=chosen.challenger,
        note="; ".join(
            [
                *_what_happened(first, marks),
                *_what_changed(chosen, before),
                *_what_is_missing(named or first),
                *_what_is_noise(fit, pulled, usable),
            ]
        ),
    )


def _candidates(fits: list[_Fit]) -> list[Candidate]:
    """What the choice needs of each; a model without a p-value of its own is held against those without a pull."""
    found = []
    for fit in fits:
        model = MODELS[fit.model]
        criterion = None if fit.loglik is None else fit.criterion
        found.append(Candidate(fit.model, fit.status, criterion, model.has_pull, fit.no_reversion_p))
    free = [one.bic for one in found if one.is_usable and not one.has_pull and one.bic is not None]
    return [
        replace(one, without_pull=min(free, default=None)) if not MODELS[one.model].tests_pull else one for one in found
    ]


def _choice(before: Row | None) -> Choice | None:
    return None if before is None else Choice(before.model, before.challenger)


def _weights(fits: list[_Fit], candidates: list[Candidate]) -> list[float | None]:
    usable = [fit.criterion if one.is_usable else float("nan") for fit, one in zip(fits, candidates, strict=True)]
    if np.isnan(usable).all():
        return [None] * len(fits)
    return [None if np.isnan(weight) else float(weight) for weight in weights(usable)]


def _pulled(
    named: _Fit | None, fit: _Fit | None, usable: dict[str, _Fit], weight: dict[str, float | None]
) -> _Fit | None:
    """The fit that the half-life is told from: the model in force, or the heaviest that has a half-life."""
    if named is not None and MODELS[named.model].has_half_life:
        return fit
    with_one = (one for one in usable.values() if MODELS[one.model].has_half_life)
    return max(with_one, key=lambda one: weight[one.model] or 0.0, default=None)


def _volatility_unit(series: Series) -> str:
    time = "√second" if series.setting.clock == "seconds" else "√year"
    return f"1/{time}" if series.setting.sign == "positive" else f"{series.setting.unit or 'unit'}/{time}"


def _what_happened(fit: _Fit, marks: _Marks) -> list[str]:
    count = marks.corrections(fit)
    words = [] if not count else ["correction" if count == 1 else f"{count} corrections"]
    return [*words, "not positive"] if marks.not_positive(fit) else words


def _what_changed(chosen: Choice, before: Row | None) -> list[str]:
    changed = before is not None and before.model is not None and before.model != chosen.model
    return [f"model changed from {before.model}"] if changed and before is not None else []


def _what_is_missing(fit: _Fit) -> list[str]:
    if fit.status == "too_short":
        return [f"too short: {fit.n} steps"]
    return [_NO_NUMBERS[fit.status]] if fit.status in _NO_NUMBERS else []


def _what_is_noise(fit: _Fit | None, pulled: _Fit | None, usable: dict[str, _Fit]) -> list[str]:
    """Noise in the observations makes whatever knows no noise see a pull, and p-values of no pull too small."""
    share = max((one.noise_share for one in usable.values() if one.noise_share is not None), default=0.0)
    fooled = [one for one in (fit, pulled) if one and one.noise_share is None and one.no_reversion_p is not None]
    return ["noise: the pull may be a bounce"] if share > _MUCH_NOISE and fooled else []


def _scaled(value: float | None, factor: float) -> float | None:
    return None if value is None else value * factor


def _put_in_force(con: duckdb.DuckDBPyConnection, rows: list[Row], gone: list[int], run_id: int) -> None:
    leaving = [*gone, *(row.series_id for row in rows)]
    con.execute(query("close_latest"), {"run": run_id, "series": leaving})
    if rows:
        names = [field.name for field in fields(Row)]
        columns = [[getattr(row, name) for row in rows] for name in names]
        con.register("latest_row", pa.table(columns, names))
        con.execute(
            f"insert into base.latest ({', '.join(names)}, run_from) "
            f"select {', '.join(names)}, {run_id} from latest_row order by series_id"
        )
        con.unregister("latest_row")
