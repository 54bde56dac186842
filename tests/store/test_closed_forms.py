"""The closed forms in SQL alone give the numbers of the views, in any DuckDB client."""

import duckdb
import pytest

from driftbook import store
from driftbook.store.demo import run_demo

# Two sums of squares in different orders: some ten units in the last place, times what a difference of levels loses.
AGREE = 1e-10


@pytest.fixture(scope="module")
def plain(tmp_path_factory):
    folder = tmp_path_factory.mktemp("closed") / "island"
    run_demo(folder, lambda _: None, lambda _: "", lambda _: "")
    with duckdb.connect(folder / "island.duckdb", read_only=True) as con:
        yield con


@pytest.mark.parametrize(
    ("model", "column"),
    [
        *(("abm", one) for one in ("mu", "sigma", "loglik")),
        *(("gbm", one) for one in ("mu", "sigma", "loglik")),
        *(("ou", one) for one in ("kappa", "theta", "sigma", "loglik")),
    ],
)
@pytest.mark.parametrize("lookback", [250, 500])
def test_sql_alone_gives_the_numbers_of_the_view(plain, model, column, lookback):
    """Within 1e-10 of their size, or of their standard error where they are near zero, on every window."""
    error = "0" if column == "loglik" else f"b.{column}_se"
    ((compared, worst, missing),) = plain.execute(
        f"""
        select count(*), max(abs(a.{column} - b.{column}) / (abs(b.{column}) + {error})),
          (select count(*) from {model} where series = 'diesel' and lookback = {lookback} and {column} is not null)
            - count(*)
        from {model}_closed_form('diesel', {lookback}) a
        join {model} b on b.series = 'diesel' and b.lookback = {lookback} and b.window_end = a.window_end
          and b.window_start = a.window_start and b.n = a.n
        """
    ).fetchall()
    assert compared > 200
    assert missing == 0
    assert worst < AGREE


def test_a_series_without_equal_steps_has_no_closed_form(plain):
    assert plain.execute("select count(*) from ou_closed_form('reservoir', 250)").fetchall() == [(0,)]


def test_both_are_there_for_a_connection_of_driftbook(plain):
    path = plain.execute("select path from duckdb_databases() where not internal").fetchall()[0][0]
    with store.connect(path) as con:
        assert con.execute("select count(*) > 200 from gbm_closed_form('diesel', 250)").fetchall() == [(True,)]
