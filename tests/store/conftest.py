"""Books to test with: an empty one, and one with a history of an island utility's series."""

import shutil
import sys
from pathlib import Path

import polars as pl
import pytest

from driftbook import store
from driftbook.estimators import MODELS
from driftbook.store.swap import create

# what stands beside the tests is imported by its bare name
sys.path.append(str(Path(__file__).parent))

from made_series import days, plan_text, wave
from page_books import thousand_series


@pytest.fixture(scope="session")
def _empty(tmp_path_factory: pytest.TempPathFactory) -> Path:
    path = tmp_path_factory.mktemp("empty") / "desk.duckdb"
    create(path)
    return path


@pytest.fixture
def book(tmp_path: Path, _empty: Path) -> Path:
    """An empty book; a plain copy is a valid book."""
    path = tmp_path / "desk.duckdb"
    shutil.copyfile(_empty, path)
    return path


@pytest.fixture(scope="session")
def _history(tmp_path_factory: pytest.TempPathFactory) -> Path:
    """Six runs: two series added, corrected, withdrawn, refused rows, two plans, estimates replaced and closed."""
    path = tmp_path_factory.mktemp("history") / "desk.duckdb"
    create(path)
    adding = store.Options(add_series=True)
    with store.writing(path, at="2026-01-05T08:00") as work:
        work.ingest(pl.concat([days("pellets_fob", wave(30)), days("power_da", wave(24, 60.0))]), adding, name="first")
        first = plan_text(
            {"pellets_fob": [8, 12], "power_da": [8]}, models=tuple(MODELS), also_called={"pellets_fob": "PEL FOB"}
        )
        work.refresh(first)
    with store.writing(path, at="2026-01-06") as work:
        work.ingest(
            pl.concat([days("pellets_fob", wave(2, first=30), 30), days("peg", wave(3, 1.0)), days("spark", wave(2))]),
            name="second",
        )
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
        second = plan_text({"pellets_fob": [8], "peg": [6, 8]}, models=tuple(MODELS), also_called={"peg": "PEG FIX"})
        work.refresh(second, yes=True)
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


@pytest.fixture(scope="session")
def many(tmp_path_factory: pytest.TempPathFactory) -> Path:
    """A book with a thousand series, to be read only."""
    return thousand_series(tmp_path_factory.mktemp("many") / "many.duckdb")
