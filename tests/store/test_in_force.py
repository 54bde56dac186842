"""The model in force: what is chosen from one run's fits, and how it changes from run to run."""

import itertools
from datetime import UTC, datetime, timedelta

import duckdb
import numpy as np
import pytest
from made_series import days, plan_text

from driftbook import store
from driftbook.store.in_force import Candidate, Choice, choose

NEVER = Choice(None, None)


def level(bic, status="ok", model="abm"):
    """A fit of a model without a pull."""
    return Candidate(model, status, bic, has_pull=False, no_reversion_p=None)


def pull(bic, p=0.01, status="ok", model="ou"):
    """A fit of a model with a pull."""
    return Candidate(model, status, bic, has_pull=True, no_reversion_p=p)


def curved(bic, without_pull, status="ok"):
    """A fit of a model with a pull that has no p-value of its own."""
    return Candidate("quartic", status, bic, has_pull=True, no_reversion_p=None, without_pull=without_pull)


@pytest.mark.parametrize(("candidates", "before", "after"), [
    # without a p-value it has to confine, and to be ahead of a model without a pull
    ([level(10.0), curved(9.0, 10.0)], None, Choice("quartic", None)),
    ([level(10.0), curved(9.0, 10.0, "at_bound")], None, Choice("abm", None)),
    ([level(10.0), curved(11.0, 10.0), pull(12.0)], None, Choice("abm", None)),
    ([pull(12.0), curved(9.0, None)], None, Choice("ou", None)),
    ([pull(12.0, p=0.5), curved(9.0, None)], None, Choice("quartic", None)),
    # the first choice: the best by bic; with a pull only where it is significant
    ([level(10.0), pull(9.0)], None, Choice("ou", None)),
    ([level(10.0), pull(9.0)], NEVER, Choice("ou", None)),
    ([level(9.0), pull(10.0)], None, Choice("abm", None)),
    ([level(10.0), pull(-90.0, p=0.05)], None, Choice("abm", None)),
    ([level(10.0), pull(9.0, p=0.049)], None, Choice("ou", None)),
    ([level(10.0), pull(9.0, p=None)], None, Choice("abm", None)),
    ([level(10.0), pull(9.0, p=None, status="no_reversion")], None, Choice("abm", None)),
    ([level(10.0, "at_bound"), level(11.0, model="gbm")], None, Choice("abm", None)),
    # nothing else is there: a model with a pull that is not significant is better than none
    ([pull(9.0, p=0.5), pull(8.0, p=0.4, model="exp_ou")], None, Choice("exp_ou", None)),
    ([pull(9.0, p=0.01), pull(8.0, p=0.4, model="exp_ou")], None, Choice("ou", None)),
    # no numbers, or numbers that are never used
    ([level(None, "flat"), pull(None, status="flat")], None, NEVER),
    ([level(1.0, "not_converged"), level(2.0, "too_coarse", "gbm"), level(3.0, "discrete", "x")], None, NEVER),
    ([level(1.0, "not_converged"), level(20.0, model="gbm")], None, Choice("gbm", None)),
    ([], Choice("abm", None), NEVER),
    # a lead of 6, twice
    ([level(10.0), pull(4.0)], Choice("abm", None), Choice("abm", None)),
    ([level(10.0), pull(3.999)], Choice("abm", None), Choice("abm", "ou")),
    ([level(10.0), pull(3.999)], Choice("abm", "ou"), Choice("ou", None)),
    ([level(10.0), pull(4.0)], Choice("abm", "ou"), Choice("abm", None)),
    ([level(10.0), pull(3.999)], Choice("abm", "gbm"), Choice("abm", "ou")),
    ([level(10.0), level(3.0, model="gbm"), pull(2.0)], Choice("abm", "gbm"), Choice("abm", "ou")),
    ([level(10.0), pull(3.0, p=0.06)], Choice("abm", "ou"), Choice("abm", None)),
    ([level(3.0), pull(10.0)], Choice("abm", None), Choice("abm", None)),
    ([level(3.0), pull(10.0)], Choice("abm", "ou"), Choice("abm", None)),
    # an incumbent whose pull is no longer significant has no lead to defend, but the change still takes two runs
    ([level(10.0), pull(3.0, p=0.2)], Choice("ou", None), Choice("ou", "abm")),
    ([level(10.0), pull(3.0, p=0.2)], Choice("ou", "abm"), Choice("abm", None)),
    ([level(10.0), pull(3.0, p=0.01)], Choice("ou", "abm"), Choice("ou", None)),
    ([pull(3.0, p=0.2)], Choice("ou", None), Choice("ou", None)),
    # an incumbent without numbers, or no longer there, gives way at once
    ([level(10.0), pull(None, status="alternating")], Choice("ou", None), Choice("abm", None)),
    ([level(10.0), pull(9.0, status="not_converged")], Choice("ou", "abm"), Choice("abm", None)),
    ([level(10.0), level(9.9, model="gbm")], Choice("ou", None), Choice("gbm", None)),
    ([level(None, "flat"), pull(None, status="flat")], Choice("abm", "ou"), NEVER),
])  # fmt: skip
def test_the_choice_after_a_run(candidates, before, after):
    assert choose(candidates, "best", before) == after


@pytest.mark.parametrize(("candidates", "before", "after"), [
    ([level(10.0), pull(-90.0)], None, Choice("abm", None)),
    ([level(10.0), pull(-90.0)], Choice("ou", "abm"), Choice("abm", None)),
    ([level(None, "flat"), pull(1.0)], Choice("ou", None), Choice("abm", None)),
    ([pull(1.0)], Choice("ou", None), NEVER),
])  # fmt: skip
def test_a_pinned_model_is_in_force_whatever_leads(candidates, before, after):
    assert choose(candidates, "abm", before) == after


# Driven through refreshes: a path that first wanders and then is pulled.

MONDAY = datetime(2026, 1, 5, 8, tzinfo=UTC)


@pytest.fixture(scope="module")
def history(tmp_path_factory):
    """What `latest` said after each of many runs, beside the fits of that run."""
    book = tmp_path_factory.mktemp("driven") / "desk.duckdb"
    store.create(book)
    draws = np.random.default_rng(11).standard_normal(160)
    x, path = 0.0, []
    for day, draw in enumerate(draws.tolist()):
        x = x + draw if day < 60 else 0.45 * x + 2 * draw
        path.append(100 + x)
    plan, starts = plan_text({"peg": [40]}, models=("abm", "ou")), [0, *range(64, 112, 4), 112]
    for run, (first, last) in enumerate(itertools.pairwise(starts)):
        with store.writing(book, at=MONDAY + timedelta(days=run)) as work:
            work.ingest(days("peg", path[first:last], first), store.Options(add_series=True), name=f"lot {run}")
            work.refresh(plan)
    return book


def test_refreshes_choose_as_the_rule_says_from_the_fits_in_force(history):
    """Every run's choice again, from the views as they were at that run."""
    with duckdb.connect(history, read_only=True) as con:
        (runs,) = con.execute("select max(run_id) from run").fetchone()
        before, seen = None, []
        for run in range(1, runs + 1):
            fits = con.execute(
                "select f.model, f.status, f.bic, f.model = 'ou', o.no_reversion_p from fit_at_run($run) f "
                "left join ou_at_run($run) o on f.model = 'ou' and o.window_end = f.window_end "
                "where f.window_end = (select max(window_end) from fit_at_run($run)) order by f.model",
                {"run": run},
            ).fetchall()
            before = choose([Candidate(*fit) for fit in fits], "best", before)
            said = con.execute("select model, note from latest_at_run(?)", [run]).fetchone()
            seen.append((said[0], before.model))
    assert [told for told, _ in seen] == [again for _, again in seen]
    assert {told for told, _ in seen} == {"abm", "ou"}


def test_a_change_takes_two_runs_in_a_row_and_is_noted_once(history):
    sql = "select model, challenger, note from base.latest order by run_from"
    with duckdb.connect(history, read_only=True) as con:
        rows = con.execute(sql).fetchall()
    changes = [at for at in range(1, len(rows)) if rows[at][0] != rows[at - 1][0]]
    assert changes
    for at in changes:
        assert rows[at - 1][1] == rows[at][0]
        assert rows[at][2] == f"model changed from {rows[at - 1][0]}"
    assert [row[2] for at, row in enumerate(rows) if at not in changes] == [""] * (len(rows) - len(changes))
