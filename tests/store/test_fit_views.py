"""fit, estimate and versions_of against the models' tables and against a plain computation."""

import math
from datetime import datetime, timedelta

import duckdb
import polars as pl
import pytest

from driftbook import store
from driftbook.estimators import MODELS
from driftbook.store.plan import parse_plan

USABLE = ("ok", "no_reversion", "at_bound")
WINDOW = ("series", "lookback", "window_end")
RUNS = range(1, 7)


@pytest.fixture
def con(filled):
    with duckdb.connect(filled, read_only=True) as con:
        yield con


def rows(con, sql, values=None):
    found = con.execute(sql, values)
    names = [column[0] for column in found.description]
    return [dict(zip(names, row, strict=True)) for row in found.fetchall()]


def fits_of_tables(con, run):
    """What fit should say at a run, from the base tables alone."""
    found = []
    for name, model in MODELS.items():
        sql = (
            f"select s.series, m.* from base.{name} m join base.series s using (series_id) "
            "where m.run_from <= $run and (m.run_to is null or m.run_to > $run)"
        )
        for row in rows(con, sql, {"run": run}):
            k, n, loglik = len(model.parameters), row["n"], row["loglik"]
            there = loglik is not None
            found.append({
                **{key: row[key] for key in (*WINDOW, "window_start", "n", "status", "loglik")},
                "model": name, "k": k, "run_id": row["run_from"],
                "aic": 2 * k - 2 * loglik if there else None, "bic": k * math.log(n) - 2 * loglik if there else None,
            })  # fmt: skip
    for fit in found:
        window = [one for one in found if all(one[key] == fit[key] for key in WINDOW)]
        usable = [one for one in window if one["status"] in USABLE]
        fit["models_compared"] = len(usable)
        least = min((one["bic"] for one in usable), default=None)
        total = sum(math.exp(-(one["bic"] - least) / 2) for one in usable)
        fit["model_weight"] = math.exp(-(fit["bic"] - least) / 2) / total if fit in usable else None
    return found


def in_order(found):
    return sorted(found, key=lambda row: [str(row[key]) for key in (*WINDOW, "model", "run_id")])


def close(row, other):
    assert row.keys() == other.keys()
    for name, value in row.items():
        assert value == (pytest.approx(other[name], rel=1e-12) if isinstance(other[name], float) else other[name]), name


def assert_same_fits(found, expected):
    assert len(found) == len(expected)
    for row, other in zip(in_order(found), in_order(expected), strict=True):
        close(row, other)


def test_fit_at_every_run_is_what_the_tables_say(con):
    for run in RUNS:
        assert_same_fits(rows(con, f"from fit_at_run({run})"), fits_of_tables(con, run))


def test_fit_is_that_of_the_last_run_and_has_weights_worth_the_comparison(con):
    found = rows(con, "from fit")
    assert_same_fits(found, fits_of_tables(con, RUNS[-1]))
    compared = {row["models_compared"] for row in found}
    assert 2 in compared  # a series of any sign
    assert max(compared) >= 4
    assert any(0.01 < (row["model_weight"] or 0.0) < 0.99 for row in found)


def test_fit_as_of_a_moment_is_fit_at_the_run_before_it(con):
    for run, moment in con.execute("select run_id, moment from run order by run_id").fetchall():
        assert_same_fits(rows(con, "from fit_as_of(?)", [moment]), rows(con, f"from fit_at_run({run})"))


def test_the_weights_of_a_window_make_one(con):
    sums = con.execute(
        "select sum(model_weight), any_value(models_compared) from fit group by series, lookback, window_end"
    )
    for total, compared in sums.fetchall():
        assert total == (None if compared == 0 else pytest.approx(1.0, abs=1e-12))


def test_the_columns_of_fit_and_estimate_are_those_promised(con):
    fit = "series lookback window_start window_end model n k loglik aic bic model_weight models_compared status run_id"
    estimate = "series lookback window_end model parameter value se lower upper status run_id"
    moments = ["run_from", "run_to", "in_force_from", "in_force_to"]
    for view, names in (("fit", fit.split()), ("estimate", estimate.split())):
        assert [row[0] for row in con.execute(f"describe {view}").fetchall()] == names
        assert [row[0] for row in con.execute(f"describe from {view}_at_run(1)").fetchall()] == names
        versions = [row[0] for row in con.execute(f"describe versions.{view}").fetchall()]
        assert versions == [*names[:-1], *moments]


def test_every_version_of_a_fit_has_the_weight_that_it_had_when_it_came(con):
    found = rows(con, "from versions.fit")
    for run in RUNS:
        then = {tuple(row[key] for key in (*WINDOW, "model")): row for row in rows(con, f"from fit_at_run({run})")}
        came = [row for row in found if row["run_from"] == run and row["run_to"] != run]
        for row in came:
            other = then[tuple(row[key] for key in (*WINDOW, "model"))]
            assert row["model_weight"] == (
                None if other["model_weight"] is None else pytest.approx(other["model_weight"], rel=1e-12)
            )
            assert row["models_compared"] == other["models_compared"]
    assert len(found) == sum(con.execute(f"select count(*) from base.{name}").fetchone()[0] for name in MODELS)


def test_estimate_has_a_row_for_each_parameter_of_each_fit(con):
    for run in RUNS:
        found = {tuple(row.values()) for row in rows(con, f"from estimate_at_run({run})")}
        expected = set()
        for name, model in MODELS.items():
            for row in rows(con, f"from {name}_at_run({run})"):
                for one in model.parameters:
                    ends = [row[one.name + end] for end in ("", "_se", "_lower", "_upper")]
                    expected.add((*(row[key] for key in WINDOW), name, one.name, *ends, row["status"], row["run_id"]))
        assert found == expected
    assert rows(con, "from estimate order by all") == rows(con, "from estimate_at_run(6) order by all")


def test_versions_of_a_window_are_its_estimates_run_by_run(con):
    sql = "select window_end from versions.ou where series = 'pellets_fob' and lookback = 8 group by all"
    (window,) = con.execute(f"{sql} having count(distinct run_from) > 1 order by all limit 1").fetchone()
    found = rows(con, "from versions_of('pellets_fob', 'ou', 8, ?)", [window])
    expected = rows(
        con,
        "from versions.estimate where series = 'pellets_fob' and model = 'ou' and lookback = 8 and window_end = ?",
        [window],
    )
    assert list(found[0]) == [row[0] for row in con.execute("describe versions.estimate").fetchall()]
    assert len({row["run_from"] for row in found}) > 1
    assert sorted(map(str, found)) == sorted(map(str, expected))


def test_versions_of_takes_a_window_end_as_text(con):
    (window,) = con.execute("select max(window_end) from ou where series = 'pellets_fob'").fetchone()
    told = rows(con, "from versions_of('pellets_fob', 'ou', 8, ?) order by all", [window.isoformat()])
    assert told == rows(con, "from versions_of('pellets_fob', 'ou', 8, ?) order by all", [window])
    assert len(told) >= 3


def test_versions_of_reads_a_moment_with_its_zone_and_a_bare_date_as_the_whole_day(con, tmp_path):
    (window,) = con.execute("select max(window_end) from ou where series = 'pellets_fob'").fetchone()
    there = window + timedelta(hours=2)
    told = rows(con, "from versions_of('pellets_fob', 'ou', 8, ?)", [f"{there.isoformat()}+02:00"])
    assert told == rows(con, "from versions_of('pellets_fob', 'ou', 8, ?)", [window])
    assert told
    book = tmp_path / "hours.duckdb"
    store.create(book)
    hours = [datetime(2026, 1, 1, 20) + timedelta(hours=hour) for hour in range(9)]
    frame = pl.DataFrame({"series": "level", "time": hours, "value": [1.0, 3, 2, 5, 4, 7, 5, 8, 6]})
    plan = 'name = "d"\n[[series]]\nname = "level"\n[[estimate]]\nseries = ["*"]\nmodels = ["abm"]\nlookbacks = [4]\n'
    with store.writing(book) as work:
        work.ingest(frame, store.Options(add_series=True), name="hours")
        work.refresh(parse_plan(plan, "the plan"))
    with store.connect(book) as other:
        for end, windows in (("'2026-01-02'", 5), ("date '2026-01-02'", 5), ("'2026-01-02T01:00'", 1)):
            sql = f"select count(distinct window_end) from versions_of('level', 'abm', 4, {end})"
            assert other.execute(sql).fetchone() == (windows,)


def test_a_window_of_which_nothing_is_known_has_no_versions(con):
    assert rows(con, "from versions_of('pellets_fob', 'ou', 8, '1999-01-01')") == []
    assert rows(con, "from versions_of('nobody', 'ou', 8, '2024-01-20')") == []


def test_the_views_say_the_same_on_a_python_connection(filled, con):
    with store.connect(filled) as other:
        assert_same_fits(rows(other, "from fit"), rows(con, "from fit"))
        for view in ("estimate", "versions.estimate", "versions.latest"):
            assert rows(other, f"from {view} order by all") == rows(con, f"from {view} order by all")
