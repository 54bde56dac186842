"""The plan: what to estimate. A TOML file, checked as a whole, with every mistake named by its key."""

from __future__ import annotations

import difflib
import hashlib
import tomllib
from collections import Counter
from dataclasses import dataclass
from fnmatch import fnmatchcase
from pathlib import Path
from typing import Annotated, Any, Literal, Self
from zoneinfo import available_timezones

from pydantic import AfterValidator, BaseModel, ConfigDict, Field, ValidationError, model_validator

from driftbook.estimators import MODELS
from driftbook.store.errors import PlanError
from driftbook.store.series import Setting

# Keys of later plan files: named, so that a plan that uses them hears that this driftbook cannot do it yet.
_NOT_YET = {"also_called", "in_force", "shift", "breaks", "formula", "group", "intake", "also", "horizons"}


def _known_zone(zone: str) -> str:
    if zone not in available_timezones():
        near = difflib.get_close_matches(zone, available_timezones(), n=1)
        raise ValueError(f"no time zone is called {zone!r}" + (f"; did you mean {near[0]!r}?" if near else ""))
    return zone


def _known_model(model: str) -> str:
    if model not in MODELS:
        near = difflib.get_close_matches(model, MODELS, n=1)
        hint = f"did you mean {near[0]!r}?" if near else f"there are {', '.join(MODELS)}"
        raise ValueError(f"no model is called {model!r}; {hint}")
    return model


class _Strict(BaseModel):
    model_config = ConfigDict(extra="forbid", frozen=True, strict=True)


class PlannedSeries(_Strict):
    """One `[[series]]` of a plan."""

    name: Annotated[str, Field(min_length=1, max_length=200)]
    sign: Literal["any", "positive"] = "any"
    unit: str | None = None
    clock: Literal["trading"] = "trading"
    periods_per_year: Annotated[float, Field(gt=0, allow_inf_nan=False, strict=False)] = 252.0
    time_zone: Annotated[str, AfterValidator(_known_zone)] = "UTC"
    same_time: Literal["refuse", "last", "median"] = "refuse"
    stale_after_days: Annotated[float, Field(gt=0, allow_inf_nan=False, strict=False)] = 5.0

    @property
    def setting(self) -> Setting:
        """The setting that the book keeps for this series."""
        return Setting(**self.model_dump(exclude={"name"}), planned=True)


class PlannedEstimate(_Strict):
    """One `[[estimate]]` of a plan."""

    series: Annotated[list[str], Field(min_length=1)]
    models: Annotated[list[Annotated[str, AfterValidator(_known_model)]], Field(min_length=1)]
    lookbacks: Annotated[list[Annotated[int, Field(ge=1, le=10_000_000)]], Field(min_length=1)]
    every: Literal["observation"] = "observation"


@dataclass(frozen=True)
class Entry:
    """One thing to keep estimated: a model on the windows of one lookback of one series."""

    series: str
    model: str
    lookback: int


class Plan(_Strict):
    """A whole plan, checked."""

    name: Annotated[str, Field(min_length=1)]
    headline_lookback: Annotated[int, Field(ge=1)] | None = None
    series: Annotated[list[PlannedSeries], Field(min_length=1)]
    estimate: Annotated[list[PlannedEstimate], Field(min_length=1)]

    @model_validator(mode="after")
    def _one_entry_once(self) -> Self:
        mistakes = [*self._repeated_names(), *self._unmatched_patterns(), *self._repeated_entries()]
        if mistakes:
            raise ValueError("\n".join(mistakes))
        return self

    @property
    def entries(self) -> list[Entry]:
        """Every series, model and lookback to keep estimated, in the plan's order."""
        return [
            Entry(series, model, lookback)
            for estimate in self.estimate
            for series in self._matching(estimate.series)
            for model in estimate.models
            for lookback in estimate.lookbacks
        ]

    def _matching(self, patterns: list[str]) -> list[str]:
        names = [series.name for series in self.series]
        return [name for name in names if any(fnmatchcase(name, pattern) for pattern in patterns)]

    def _repeated_names(self) -> list[str]:
        counts = Counter(series.name for series in self.series)
        return [f"series {name!r} stands there twice" for name, count in counts.items() if count > 1]

    def _unmatched_patterns(self) -> list[str]:
        names = [series.name for series in self.series]
        patterns = [pattern for estimate in self.estimate for pattern in estimate.series]
        return [
            f"estimate: no [[series]] is called {pattern!r}{_near(pattern, names)}"
            for pattern in patterns
            if not self._matching([pattern])
        ]

    def _repeated_entries(self) -> list[str]:
        return [
            f"estimate: {entry.model} on {entry.series!r} with lookback {entry.lookback} stands there twice"
            for entry, count in Counter(self.entries).items()
            if count > 1
        ]


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
        return PlanText(Plan.model_validate(tomllib.loads(text)), text)
    except tomllib.TOMLDecodeError as error:
        raise PlanError(f"{where} is not TOML: {error}.") from error
    except ValidationError as error:
        mistakes = [line for mistake in error.errors() for line in _in_words(mistake)]
        raise PlanError(f"{where} has {_count(mistakes)}:\n" + "\n".join(f"  {line}" for line in mistakes)) from error


def _near(name: str, names: list[str]) -> str:
    near = difflib.get_close_matches(name, names, n=1)
    return f"; did you mean {near[0]!r}?" if near else ""


def _count(mistakes: list[str]) -> str:
    return "a mistake" if len(mistakes) == 1 else f"{len(mistakes)} mistakes"


def _in_words(mistake: Any) -> list[str]:
    """One line for each thing wrong, beginning with the key where it stands."""
    where = _key(mistake["loc"])
    if mistake["type"] == "extra_forbidden":
        return [f"{where}: {_unknown_key(mistake['loc'])}"]
    message: str = mistake["msg"].removeprefix("Value error, ")
    if not where:
        return message.split("\n")
    given = "" if mistake["type"] == "missing" else f" (there is {mistake['input']!r})"
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
    tables: dict[str, type[BaseModel]] = {"series": PlannedSeries, "estimate": PlannedEstimate}
    fields = tables.get(str(location[0]), Plan).model_fields if len(location) > 1 else Plan.model_fields
    return "no such key" + (_near(key, list(fields)) or f"; there are {', '.join(fields)}")
