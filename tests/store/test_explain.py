"""Why a number moved: two statements, and what came between them."""

from datetime import UTC, datetime, timedelta

import duckdb
import numpy as np
import polars as pl
import pytest
from made_series import days, plan_text

from driftbook import store
from driftbook.estimators import MODELS
from driftbook.store.explaining import Correction, explain

ADDING = store.Options(add_series=True, yes=True)
MONDAY = datetime(2026, 1, 5, 8, tzinfo=UTC)
X = (100 + 3 * np.sin(np.arange(80) * 1.3) + np.random.default_rng(4).standard_normal(80)).tolist()
PLAN = plan_text({"pellets_fob": [20, 30], "peg": [20]}, models=("abm", "ou"))


def day(number):
    return datetime(2024, 1, 1) + timedelta(days=number)


@pytest.fixture(scope="module")
def book(tmp_path_factory):
    """Run 1 first lot; 2 a day; 3 two corrections and a withdrawal; 4 a late observation; 5 another plan."""
    path = tmp_path_factory.mktemp("explained") / "desk.duckdb"
    store.create(path)
    late = days("pellets_fob", [99.0], 55).with_columns(pl.col("time") + timedelta(hours=7))
    corrected = pl.concat([days("pellets_fob", [95.0, None], 50), days("pellets_fob", [96.0], 3)])
    other = plan_text({"pellets_fob": [20, 30], "peg": [20]}, 365.0, models=("abm", "ou"))
    lots = [
        (pl.concat([days("pellets_fob", X[:60]), days("peg", [1.0] * 30), days("spark", X[:10])]), PLAN),
        (days("pellets_fob", X[60:61], 60), None),
        (corrected, None),
        (late, None),
        (days("pellets_fob", X[61:62], 61), other),
        (None, plan_text({"pellets_fob": [20, 30]}, 365.0, models=("abm", "ou"))),
    ]  # fmt: skip
    for run, (frame, plan) in enumerate(lots):
        with store.writing(path, at=MONDAY + timedelta(days=run)) as work:
            if frame is not None:
                work.ingest(frame, ADDING, name=f"lot {run}")
            work.refresh(plan)
    return path


def statement(book, run, model="abm", lookback=20):
    with duckdb.connect(book, read_only=True) as con:
        return con.execute(
            f"select window_start, window_end, n, mu, mu_lower, mu_upper from {model}_at_run(?) "
            "where series = 'pellets_fob' and lookback = ? order by window_end desc limit 1",
            [run, lookback],
        ).fetchone()


def asked(book, first, last, **how):
    return explain(book, "pellets_fob", earlier=f"run:{first}", later=f"run:{last}", **({"model": "abm"} | how))


@pytest.mark.parametrize(("first", "last"), [(1, 2), (2, 3), (3, 4), (4, 5), (1, 5), (2, 2)])
def test_the_statements_are_what_was_said_after_each_run(book, first, last):
    found = asked(book, first, last)
    for told, run in ((found.earlier, first), (found.later, last)):
        said = (told.window_start, told.window_end, told.n, *told.numbers["mu"])
        assert said == statement(book, run)
        assert (told.run_id, told.moment) == (run, MONDAY + timedelta(days=run - 1))


def test_a_new_day_lets_one_step_come_and_one_leave(book):
    found = asked(book, 1, 2)
    assert (found.steps_that_came, found.steps_that_left, found.corrections, found.causes) == (1, 1, [], [])


def test_corrections_and_withdrawals_within_the_window_are_named_with_both_values(book):
    found = asked(book, 2, 3)
    assert found.corrections == [Correction(day(50), X[50], 95.0, 3), Correction(day(51), X[51], None, 3)]
    assert (found.steps_that_came, found.steps_that_left) == (1, 0)  # for the one withdrawn, one from before


def test_a_late_observation_comes_and_the_first_of_the_window_leaves(book):
    found = asked(book, 3, 4)
    assert (found.steps_that_came, found.steps_that_left, found.corrections) == (1, 1, [])


def test_a_changed_plan_and_settings_are_causes(book):
    assert asked(book, 4, 5).causes == ["plan desk changed in run 5", "settings changed in run 5"]


def test_over_several_runs_everything_is_summed_up(book):
    found = asked(book, 1, 5)
    assert [one.observed_at for one in found.corrections] == [day(50), day(51)]
    assert (found.steps_that_came, found.steps_that_left) == (3, 2)


def test_without_corrections_and_steps_nothing_came_between(book):
    found = asked(book, 2, 2)
    assert (found.corrections, found.steps_that_came, found.steps_that_left, found.causes) == ([], 0, 0, [])


def test_by_default_the_last_two_runs_that_changed_the_series_are_compared(book):
    found = explain(book, "pellets_fob")
    with duckdb.connect(book, read_only=True) as con:
        ((model, lookback),) = con.execute("select model, lookback from latest where series = 'pellets_fob'").fetchall()
    assert (found.model, found.lookback) == (model, lookback)
    assert (found.earlier.run_id, found.later.run_id) == (4, 5)


def test_runs_are_found_by_moment_date_and_number(book):
    found = explain(book, "pellets_fob", earlier="2026-01-05T08:00", later="2026-01-07")
    assert (found.earlier.run_id, found.later.run_id) == (1, 3)


def test_another_lookback_can_be_asked_for(book):
    assert asked(book, 1, 2, lookback=30).earlier.n == 30


def test_a_series_that_left_the_plan_can_still_be_explained(book):
    found = explain(book, "peg", model="ou")
    assert (found.lookback, found.later.status, found.later.window_end) == (20, "flat", day(29))


@pytest.mark.parametrize(("series", "how", "told"), [
    ("pellet_fob", {}, "the book has no series 'pellet_fob'; did you mean 'pellets_fob'?"),
    ("pellets_fob", {"model": "uo"}, f"no model is called 'uo'; there are {', '.join(MODELS)}."),
    ("pellets_fob", {"model": "gbm"}, "there is no estimate of gbm on 'pellets_fob' with that lookback."),
    ("pellets_fob", {"lookback": 99}, "with that lookback."),
    ("pellets_fob", {"earlier": "run:99"}, 'the book has no run at run:99; see driftbook sql BOOK "from run".'),
    ("pellets_fob", {"earlier": "1999-01-01"}, 'the book has no run at 1999-01-01; see driftbook sql BOOK "from run".'),
    ("pellets_fob", {"earlier": "yesterday"}, "'yesterday' is no moment; write"),
    ("pellets_fob", {"earlier": "run:3", "later": "run:2"},
     "--from is run 3 and --to is run 2; the earlier comes first."),
    ("spark", {}, "'spark' has not been estimated yet; put it into the plan and refresh."),
])  # fmt: skip
def test_what_cannot_be_explained_is_said_in_a_sentence(book, series, how, told):
    with pytest.raises(store.UsageError) as raised:
        explain(book, series, **how)
    assert told in str(raised.value)
    assert "?." not in str(raised.value)


def test_explaining_changes_nothing(book):
    before = book.read_bytes()
    explain(book, "pellets_fob")
    assert book.read_bytes() == before
