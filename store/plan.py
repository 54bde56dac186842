"""The plan: what to estimate. A TOML file, checked as a whole, with every mistake named by its key."""

from __future__ import annotations

import hashlib
import re
import tomllib
from collections import Counter
from collections.abc import Callable, Collection, Iterator
from contextlib import suppress
from dataclasses import dataclass, fields
from fnmatch import translate
from functools import cached_property
from pathlib import Path
from typing import Annotated, Any, Literal, NamedTuple, Self, TypeVar
from zoneinfo import available_timezones

from pydantic import AfterValidator, BaseModel, BeforeValidator, ConfigDict, Field, ValidationError, model_validator

from driftbook.estimators import MODELS
from driftbook.store.errors import PlanError
from driftbook.store.intake.naming import why_no_name
from driftbook.store.intake.options import DAY_FIRST, MONTH_FIRST, ROLES, not_dates, tells_the_year
from driftbook.store.series import Setting, near_name

# Keys of later plan files: named, so that a plan that uses them hears that this driftbook cannot do it yet.
_NOT_YET = {"breaks", "formula", "group", "also", "horizons"}
ALL = 0
BEST = "best"
_LONGEST = 10_000_000
# Those of a series' settings that a plan tells as they are.
_SETTINGS = {field.name for field in fields(Setting)} - {"periods_per_year", "planned"}


def _known_zone(zone: str) -> str:
    if zone not in available_timezones():
        raise ValueError(f"no time zone is called {zone!r}{near_name(zone, list(available_timezones()))}")
    return zone


def _known_model(model: str) -> str:
    if model not in MODELS:
        hint = near_name(model, list(MODELS)) or f"; there are {', '.join(MODELS)}"
        raise ValueError(f"no model is called {model!r}{hint}")
    return model


def _best_or_known_model(model: str) -> str:
    return model if model == BEST else _known_model(model)


def _lookback(value: object) -> object:
    if value == "all":
        return ALL
    if isinstance(value, int) and not isinstance(value, bool) and 1 <= value <= _LONGEST:
        return value
    raise ValueError(f'write a number of steps from 1 to {_LONGEST}, or "all"; there is {value!r}')


def _possible_name(name: str) -> str:
    reason = why_no_name(name)
    if reason is not None or name != name.strip():
        raise ValueError(f"{name!r} cannot be a name: {reason.sentence if reason else 'it has space around it.'}")
    return name


def _in_the_folder(pattern: str) -> str:
    if "/" in pattern or "\\" in pattern or pattern.startswith("."):
        raise ValueError(f"{pattern!r} leaves the inbox; name files in it, such as power_*.csv")
    return pattern


def _readable_dates(dates: str) -> str:
    if dates not in (DAY_FIRST, MONTH_FIRST) and not tells_the_year(dates):
        raise ValueError(not_dates(dates))
    return dates


def _known_roles(columns: dict[str, str]) -> dict[str, str]:
    for role in columns:
        if role not in ROLES:
            raise ValueError(f"{role!r} is nothing that a column can hold{near_name(role, list(ROLES))}")
    return columns


Name = Annotated[str, AfterValidator(_possible_name)]
Pattern = Annotated[str, Field(min_length=1)]
ModelName = Annotated[str, AfterValidator(_known_model)]
Lookback = Annotated[int, BeforeValidator(_lookback)]
Positive = Annotated[float, Field(gt=0, allow_inf_nan=False, strict=False)]


class _Strict(BaseModel):
    model_config = ConfigDict(extra="forbid", frozen=True, strict=True)


class PlannedSeries(_Strict):
    """One `[[series]]` of a plan."""

    name: Name
    sign: Literal["any", "positive"] = "any"
    unit: str | None = None
    clock: Literal["trading", "act365", "seconds"] = "trading"
    periods_per_year: Positive = 252.0
    time_zone: Annotated[str, AfterValidator(_known_zone)] = "UTC"
    same_time: Literal["refuse", "last", "median"] = "refuse"
    stale_after_days: Positive = 5.0
    also_called: list[Name] = []
    in_force: Annotated[str, AfterValidator(_best_or_known_model)] = BEST
    shift: Annotated[float, Field(allow_inf_nan=False, strict=False)] = 0.0

    @model_validator(mode="after")
    def _fits_together(self) -> Self:
        if self.in_force != BEST and not self.admits(self.in_force):
            raise ValueError(f'in_force: {self.in_force} is for series with sign = "positive"')
        if self.shift and self.sign != "positive":
            raise ValueError('shift: only models of series with sign = "positive" use it')
        return self

    def admits(self, model: str) -> bool:
        """Whether a model applies to a series of this sign."""
        return self.sign == "positive" or MODELS[model].range == "real"

    @property
    def setting(self) -> Setting:
        """The setting that the book keeps for this series."""
        periods = self.periods_per_year if self.clock == "trading" else None
        told = {name: getattr(self, name) for name in _SETTINGS}
        return Setting(**told, periods_per_year=periods, planned=True)


class PlannedEstimate(_Strict):
    """One `[[estimate]]` of a plan."""

    series: Annotated[list[Pattern], Field(min_length=1)]
    models: Annotated[list[ModelName], Field(min_length=1)]
    lookbacks: Annotated[list[Lookback], Field(min_length=1)]
    every: Literal["observation", "day", "week", "month"] = "observation"


class PlannedIntake(_Strict):
    """One `[[intake]]` of a plan: how to read files of the inbox."""

    files: Annotated[str, Field(min_length=1), AfterValidator(_in_the_folder)]
    layout: Literal["long", "wide"] = "long"
    series: Name | None = None
    columns: Annotated[dict[str, str], AfterValidator(_known_roles)] = {}
    dates: Annotated[str, AfterValidator(_readable_dates)] | None = None
    zone: Annotated[str, AfterValidator(_known_zone)] | None = None
    decimal: Literal[".", ","] = "."
    blank: list[str] = []

    @model_validator(mode="after")
    def _fits_together(self) -> Self:
        if self.layout == "wide" and self.series is not None:
            raise ValueError("series: in the wide layout each column is a series of its own; take it out")
        if self.layout == "wide" and not {"time"}.issuperset(self.columns):
            raise ValueError("columns: in the wide layout all columns but the time are series; tell the time alone")
        return self


class Entry(NamedTuple):
    """One thing to keep estimated: a model on the windows of one lookback of one series; lookback 0 is "all"."""

    series: str
    model: str
    lookback: int
    every: str

    @property
    def target(self) -> tuple[str, str, int]:
        """What only one entry may name."""
        return self.series, self.model, self.lookback


class Plan(_Strict):
    """A whole plan, checked."""

    name: Annotated[str, Field(min_length=1)]
    headline_lookback: Lookback | None = None
    series: Annotated[list[PlannedSeries], Field(min_length=1)]
    intake: list[PlannedIntake] = []
    estimate: Annotated[list[PlannedEstimate], Field(min_length=1)]

    @model_validator(mode="after")
    def _fits_together(self) -> Self:
        mistakes = list(_mistakes_between(_Parts.of(self)))
        if mistakes:
            raise ValueError("\n".join(mistakes))
        return self

    @cached_property
    def entries(self) -> list[Entry]:
        """Every series, model and lookback to keep estimated, in the plan's order."""
        return [
            Entry(series.name, model, lookback, estimate.every)
            for estimate in self.estimate
            for series in _matching(estimate.series, self.series)
            for model in estimate.models
            if series.admits(model)
            for lookback in estimate.lookbacks
        ]


@dataclass(frozen=True)
class _Parts:
    """What of a plan can be read: all of it, or what is left where single keys are wrong."""

    series: list[PlannedSeries]
    names: list[str]
    estimates: dict[int, PlannedEstimate]
    lookbacks: Collection[int] | None
    headline: int | None

    @classmethod
    def of(cls, plan: Plan) -> _Parts:
        """The parts of a plan in which every key is right."""
        names = [name for one in plan.series for name in (one.name, *one.also_called)]
        lookbacks = {lookback for estimate in plan.estimate for lookback in estimate.lookbacks}
        return cls(plan.series, names, dict(enumerate(plan.estimate, 1)), lookbacks, plan.headline_lookback)

    @classmethod
    def left_in(cls, text: dict[str, Any]) -> _Parts:
        """The tables that are right by themselves, and all names, so that no mistake hides another."""
        series = _readable(PlannedSeries, text.get("series"))
        given = [one for one in _tables(text.get("series")) if isinstance(one.get("name"), str)]
        names = [name for one in given for name in (one["name"], *_texts(one.get("also_called")))]
        estimates = _readable(PlannedEstimate, text.get("estimate"))
        return cls(list(series.values()), names, estimates, None, None)


def _tables(value: Any) -> list[dict[str, Any]]:
    return [one for one in value if isinstance(one, dict)] if isinstance(value, list) else []


def _texts(value: Any) -> list[str]:
    return [one for one in value if isinstance(one, str)] if isinstance(value, list) else []


_Table = TypeVar("_Table", bound=BaseModel)


def _readable(table: type[_Table], given: Any) -> dict[int, _Table]:
    found = {}
    for position, one in enumerate(_tables(given), start=1):
        with suppress(ValidationError):
            found[position] = table.model_validate(one)
    return found


def _mistakes_between(parts: _Parts) -> Iterator[str]:
    """What is wrong between the tables of a plan, though each may be right."""
    yield from _repeated_names(parts)
    yield from _unmatched_patterns(parts)
    yield from _models_that_do_not_apply(parts)
    yield from _repeated_entries(parts)
    if parts.lookbacks is not None and parts.headline not in (None, *parts.lookbacks):
        yield f"headline_lookback: no [[estimate]] has lookback {parts.headline or 'all'}"


def _matcher(patterns: list[str]) -> Callable[[str], bool]:
    """Whether a name is one of some patterns, or fits one; a name may itself hold what is special in a pattern."""
    exact = set(patterns)
    globs = re.compile("|".join(f"(?:{translate(one)})" for one in patterns if set(one) & set("*?[")) or r"(?!)")
    return lambda name: name in exact or globs.match(name) is not None


def _matching(patterns: list[str], series: list[PlannedSeries]) -> list[PlannedSeries]:
    matches = _matcher(patterns)
    return [one for one in series if matches(one.name)]


def _repeated_names(parts: _Parts) -> Iterator[str]:
    yield from (f"series: {name!r} stands there twice" for name, count in Counter(parts.names).items() if count > 1)


def _unmatched_patterns(parts: _Parts) -> Iterator[str]:
    names = dict.fromkeys(parts.names)
    for position, estimate in parts.estimates.items():
        for pattern in estimate.series:
            if pattern not in names and not any(map(_matcher([pattern]), names)):
                yield f"estimate[{position}].series: no [[series]] is called {pattern!r}{near_name(pattern, names)}"


def _models_that_do_not_apply(parts: _Parts) -> Iterator[str]:
    """A glob passes over series that a model is not for; a series named in full is meant."""
    for position, estimate in parts.estimates.items():
        meant = set(estimate.series)
        for one in parts.series:
            for model in estimate.models if one.name in meant else ():
                if not one.admits(model):
                    yield (
                        f"estimate[{position}].models: {model} is for series that stay above zero, and "
                        f'{one.name!r} has sign = "any"; give it sign = "positive" or leave the model out'
                    )


def _repeated_entries(parts: _Parts) -> Iterator[str]:
    targets = Counter(
        (series.name, model, lookback)
        for estimate in parts.estimates.values()
        for series in _matching(estimate.series, parts.series)
        for model in estimate.models
        if series.admits(model)
        for lookback in estimate.lookbacks
    )
    for (series, model, lookback), count in targets.items():
        if count > 1:
            yield f"estimate: {model} on {series!r} with lookback {lookback or 'all'} stands there twice"


@dataclass(frozen=True)
class PlanText:
    """A plan with the text that it was read from."""

    plan: Plan
    text: str

    @property
    def sha256(self) -> str:
        """The digest of the file's bytes: a plan is replaced when these differ."""
        return hashlib.sha256(self.text.encode()).hexdigest()


def read_plan(path: Path) -> PlanText:
    """Reads and checks a plan file; raises PlanError naming every mistake."""
    try:
        text = path.read_text(encoding="utf-8")
    except (OSError, UnicodeDecodeError) as error:
        reason = error.strerror if isinstance(error, OSError) else "it is not UTF-8 text"
        raise PlanError(f"cannot read the plan {path}: {reason}.") from error
    return parse_plan(text, str(path))


def parse_plan(text: str, where: str) -> PlanText:
    """Checks a plan's text; `where` names it in messages."""
    try:
        given = tomllib.loads(text)
    except tomllib.TOMLDecodeError as error:
        raise PlanError(f"{where} is not TOML: {error}.") from error
    try:
        return PlanText(Plan.model_validate(given), text)
    except ValidationError as error:
        mistakes = [line for mistake in error.errors() for line in _in_words(mistake)]
        if all(mistake["loc"] for mistake in error.errors()):  # else the tables were compared already
            mistakes += _mistakes_between(_Parts.left_in(given))
        raise PlanError(f"{where} has {_count(mistakes)}:\n" + "\n".join(f"  {line}" for line in mistakes)) from error


_TABLES: dict[str, type[BaseModel]] = {
    "series": PlannedSeries,
    "estimate": PlannedEstimate,
    "intake": PlannedIntake,
}


def _count(mistakes: list[str]) -> str:
    return "a mistake" if len(mistakes) == 1 else f"{len(mistakes)} mistakes"


def _in_words(mistake: Any) -> list[str]:
    """One line for each thing wrong, beginning with the key where it stands."""
    where = _key(mistake["loc"])
    if mistake["type"] == "extra_forbidden":
        return [f"{where}: {_unknown_key(mistake['loc'])}"]
    if mistake["type"] == "list_type" and where in _TABLES:
        return [f"{where}: write it as [[{where}]], in two brackets"]
    message: str = mistake["msg"].removeprefix("Value error, ")
    if not where:
        return message.split("\n")
    given = "" if mistake["type"] in ("missing", "value_error") else f" (there is {mistake['input']!r})"
    return [f"{where}: {message[0].lower()}{message[1:]}{given}"]


def _key(location: tuple[int | str, ...]) -> str:
    words = ""
    for part in location:
        words += f"[{part + 1}]" if isinstance(part, int) else f".{part}"
    return words.removeprefix(".")


def _unknown_key(location: tuple[int | str, ...]) -> str:
    key = str(location[-1])
    if key in _NOT_YET:
        return "this driftbook does not have this key yet; take it out"
    fields = _TABLES.get(str(location[0]), Plan).model_fields if len(location) > 1 else Plan.model_fields
    return "no such key" + (near_name(key, list(fields)) or f"; there are {', '.join(fields)}")
