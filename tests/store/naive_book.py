"""A book that keeps a full copy of everything after every run, for comparison: slow, and too simple to be wrong."""

from copy import deepcopy
from dataclasses import dataclass, field, replace
from datetime import datetime
from functools import cache

import numpy as np

from driftbook.estimators import MODELS, Status

MODEL = MODELS["ou"]
STORED = tuple(column.name for column in MODEL.stored)
STANDARD_ERROR = {
    name: f"{parameter.name}_se"
    for parameter in MODEL.parameters
    for name in STORED
    if name == parameter.name or name.startswith(f"{parameter.name}_")
}


@dataclass(frozen=True)
class Row:
    """What an intake says of one time: None withdraws."""

    series: str
    observed_at: datetime
    value: float | None


@dataclass(frozen=True)
class Counts:
    """How the rows of an intake came out."""

    new: int = 0
    revised: int = 0
    same: int = 0
    refused: int = 0


@dataclass(frozen=True)
class Estimate:
    """One fit and the run that wrote it; numbers in the order of STORED, None where there is none."""

    window_start: datetime
    n: int
    status: str
    numbers: tuple[float | None, ...]
    run_id: int


@dataclass(frozen=True)
class Planned:
    """What a plan says of one series."""

    periods_per_year: float
    lookbacks: tuple[int, ...]


@dataclass
class State:
    """All that is in force; values by (series, time), estimates by (series, lookback, window end)."""

    values: dict[tuple[str, datetime], tuple[float, int]] = field(default_factory=dict)
    estimates: dict[tuple[str, int, datetime], Estimate] = field(default_factory=dict)


@dataclass
class NaiveBook:
    """The book as it ought to be; `after[run]` is its whole state after a run."""

    now: State = field(default_factory=State)
    names: set[str] = field(default_factory=set)
    ever: set[tuple[str, datetime]] = field(default_factory=set)
    waiting: dict[int, list[Row]] = field(default_factory=dict)
    newest: dict[str, tuple[int, list[Row]]] = field(default_factory=dict)
    intakes: int = 0
    plan: dict[str, Planned] | None = None
    after: dict[int, State] = field(default_factory=lambda: {0: State()})

    def copy(self) -> "NaiveBook":
        """A book to work on, so that a failed run can be forgotten."""
        after = self.after
        self.after = {}
        other = deepcopy(self)
        self.after = other.after = after
        return other

    def finish(self, run: int) -> None:
        """Keeps a full copy as the state after a run."""
        self.after = {**self.after, run: deepcopy(self.now)}

    def ingest(self, name: str, rows: list[Row], run: int, *, add_series: bool) -> Counts | None:
        """Takes in one intake; None if it is the newest of its name once more."""
        known_already = name in self.newest and self.newest[name][1] == rows
        if known_already:
            if add_series:
                waiting = self.waiting.get(self.newest[name][0], [])
                self._add({row.series for row in waiting}, run)
            return None
        if add_series:
            self._add({row.series for row in rows}, run)
        self.intakes += 1
        self.newest[name] = self.intakes, rows
        unknown = [row for row in rows if row.series not in self.names]
        if unknown:
            self.waiting[self.intakes] = unknown
        counts = self._settle([row for row in rows if row.series in self.names], run)
        return replace(counts, refused=counts.refused + len(unknown))

    def _add(self, names: set[str], run: int) -> None:
        """Makes names known and takes up what waited for them, oldest intake first."""
        new = names - self.names
        self.names |= names
        for intake in sorted(self.waiting):
            self._settle([row for row in self.waiting[intake] if row.series in new], run)
            self.waiting[intake] = [row for row in self.waiting[intake] if row.series not in new]

    def _settle(self, rows: list[Row], run: int) -> Counts:
        outcomes = []
        for key in {(row.series, row.observed_at): None for row in rows}:
            said = [row.value for row in rows if (row.series, row.observed_at) == key]
            if len(set(said)) > 1:
                outcomes += ["refused"] * len(said)
            else:
                outcomes += [self._one(key, value, run) for value in said]
        return Counts(*(outcomes.count(word) for word in ("new", "revised", "same", "refused")))

    def _one(self, key: tuple[str, datetime], value: float | None, run: int) -> str:
        stood = self.now.values.get(key, (None, 0))[0]
        if value is None and key not in self.ever:
            return "refused"
        if value == stood:
            return "same"
        known = key in self.ever
        self.ever.add(key)
        if value is None:
            del self.now.values[key]
        else:
            self.now.values[key] = value, run
        return "revised" if known else "new"

    def refresh(self, plan: dict[str, Planned] | None, run: int) -> None:
        """Computes every window of every planned entry; keeps the old version of what is the same."""
        if plan is not None:
            self._add(set(plan), run)
            self.plan = plan
        computed = {}
        for series, planned in (self.plan or {}).items():
            for lookback in planned.lookbacks:
                computed |= self._estimates(series, lookback, 1.0 / planned.periods_per_year, run)
        self.now.estimates = {
            key: self.now.estimates[key] if same(self.now.estimates.get(key), fresh) else fresh
            for key, fresh in computed.items()
        }

    def _estimates(self, series: str, lookback: int, dt: float, run: int) -> dict:
        times = sorted(time for name, time in self.now.values if name == series)
        if not times:
            return {}
        if len(times) <= lookback:
            nothing = (None,) * len(STORED)
            word = Status.TOO_SHORT.word
            return {(series, lookback, times[-1]): Estimate(times[0], len(times) - 1, word, nothing, run)}
        found = {}
        for end in range(lookback, len(times)):
            window = times[end - lookback : end + 1]
            status, numbers = fit(tuple(self.now.values[series, time][0] for time in window), dt)
            found[series, lookback, window[-1]] = Estimate(window[0], lookback, status, numbers, run)
        return found


@cache
def fit(window: tuple[float, ...], dt: float) -> tuple[str, tuple[float | None, ...]]:
    """The status and numbers of one window, from that window alone."""
    found = MODEL.fit(np.array(window), dt)
    numbers = (float(found.columns[name]) for name in STORED)
    return Status(int(found.status)).word, tuple(None if np.isnan(number) else number for number in numbers)


def same(old: Estimate | None, new: Estimate) -> bool:
    """Whether an estimate is the same by the book's measure, so that its old version stays."""
    if old is None or (old.window_start, old.n, old.status) != (new.window_start, new.n, new.status):
        return False
    return same_numbers(old.numbers, new.numbers)


def same_numbers(old: tuple[float | None, ...], new: tuple[float | None, ...]) -> bool:
    """Within 1e-9 of their size or 1e-6 of their standard error, whichever is larger; log-likelihoods within 1e-6."""
    stood = dict(zip(STORED, old, strict=True))
    for name, before, now in zip(STORED, old, new, strict=True):
        if before is None or now is None:
            if before is not now:
                return False
            continue
        error = stood.get(STANDARD_ERROR.get(name, "")) or 0.0
        tolerance = 1e-6 if name == "loglik" else max(1e-9 * abs(before), 1e-6 * error)
        if abs(now - before) > tolerance:
            return False
    return True
