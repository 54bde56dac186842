"""Books to test with: an empty one, and one with a history of an island utility's series."""

import shutil
import sys
from datetime import datetime, timedelta
from pathlib import Path

import polars as pl
import pytest

from driftbook import store
from driftbook.store.plan import PlanText, parse_plan
from driftbook.store.swap import create

# helpers beside the tests are imported by their bare names
sys.path.append(str(Path(__file__).parent))

FIRST_DAY = datetime(2024, 1, 1)  # noqa: DTZ001 - times of observations are UTC without a zone


def plan_text(lookbacks: dict[str, list[int]], periods: float = 252.0, name: str = "desk") -> PlanText:
    """A plan of ou on some series, each with its lookbacks."""
    series = "".join(f'[[series]]\nname = "{one}"\nperiods_per_year = {periods}\n' for one in lookbacks)
    estimates = "".join(
        f'[[estimate]]\nseries = ["{one}"]\nmodels = ["ou"]\nlookbacks = {steps}\n' for one, steps in lookbacks.items()
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


@pytest.fixture
def book(tmp_path: Path) -> Path:
    """An empty book."""
    path = tmp_path / "desk.duckdb"
    create(path)
    return path


@pytest.fixture(scope="session")
def _history(tmp_path_factory: pytest.TempPathFactory) -> Path:
    """Six runs: two series added, corrected, withdrawn, refused rows, two plans, estimates replaced and closed."""
    path = tmp_path_factory.mktemp("history") / "desk.duckdb"
    create(path)
    adding = store.Options(add_series=True)
    with store.writing(path, at="2026-01-05T08:00") as work:
        work.ingest(pl.concat([days("pellets_fob", wave(30)), days("power_da", wave(24, 60.0))]), adding, name="first")
        work.refresh(plan_text({"pellets_fob": [8, 12], "power_da": [8]}))
    with store.writing(path, at="2026-01-06") as work:
        work.ingest(pl.concat([days("pellets_fob", wave(2, first=30), 30), days("peg", wave(3, 1.0)), days("spark", wave(2))]), name="second")
    with store.writing(path, at="2026-01-07T08:00") as work:
        corrected = [*days("pellets_fob", [97.5, 99.25], 20).rows(), *days("power_da", [None], 15).rows()]
        frame = pl.DataFrame(corrected, schema=days("peg", []).schema, orient="row")
        work.ingest(frame, store.Options(yes=True), name="third")
        # taken back in the same run
        work.ingest(days("pellets_fob", [98.5], 20), name="fourth")
    with store.writing(path, at="2026-01-08T08:00") as work:
        work.refresh()
    with store.writing(path, at="2026-01-09T08:00") as work:
        work.ingest(days("peg", wave(12, 1.0), 3), adding, name="fifth")
        work.refresh(plan_text({"pellets_fob": [8], "peg": [6, 8]}), yes=True)
    with store.writing(path) as work:
        work.ingest(days("pellets_fob", wave(1, first=32), 32), name="sixth")
        work.refresh()
    return path


@pytest.fixture
def filled(tmp_path: Path, _history: Path) -> Path:
    """A copy of a book with six runs; a plain copy is a valid book."""
    path = tmp_path / "desk.duckdb"
    shutil.copyfile(_history, path)
    return path
