"""A refresh warns where the plan says something that its user may not have meant."""

from datetime import datetime, timedelta

import polars as pl
import pytest
from made_series import wave

from driftbook import store
from driftbook.store.cli import app
from driftbook.store.plan import parse_plan

MONDAY = datetime(2024, 1, 1)
PLAN = """
name = "desk"
[[series]]
name = "pellets_fob"
clock = "{clock}"
[[estimate]]
series = ["pellets_fob"]
models = ["abm"]
lookbacks = [50]
"""


def deliver(book, clock, *, weekends):
    every_day = (MONDAY + timedelta(days=n) for n in range(400))
    times = [day for day in every_day if weekends or day.weekday() < 5]
    frame = pl.DataFrame({"series": ["pellets_fob"] * len(times), "time": times, "value": wave(len(times))})
    with store.writing(book) as work:
        work.ingest(frame, store.Options(add_series=True), name="all")
        return work.refresh(parse_plan(PLAN.format(clock=clock), "the plan"))


def test_elapsed_time_for_a_series_without_weekends_is_warned_of(book, capsys):
    done = deliver(book, "act365", weekends=False)
    assert [warning.split(" has ")[0] for warning in done.warnings] == ["pellets_fob"]
    assert app.run(["refresh", str(book), "--all"]) == 0
    assert "warning: pellets_fob has no weekends" in capsys.readouterr().out


@pytest.mark.parametrize(("clock", "weekends"), [("act365", True), ("trading", False), ("seconds", False)])
def test_nothing_is_warned_of_where_the_clock_fits(book, clock, weekends):
    assert deliver(book, clock, weekends=weekends).warnings == ()
