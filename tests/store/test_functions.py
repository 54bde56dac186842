"""The estimators in SQL: the book's numbers bit for bit, a status for whatever cannot be fitted, never an exception."""

import itertools
import math
import struct
from concurrent.futures import ThreadPoolExecutor
from datetime import UTC, datetime, timedelta

import duckdb
import numpy as np
import polars as pl
import pytest
from made_series import days

from driftbook import store
from driftbook.estimators import MODELS, Status
from driftbook.estimators.realised import bipower_variation, realised_variance
from driftbook.store.plan import parse_plan

MODEL_NAMES = list(MODELS)
GIVEN = {name: [one.name for one in (*model.settings, *model.parameters)] for name, model in MODELS.items()}
MONDAY = datetime(2026, 1, 5, 8, tzinfo=UTC)
ADDING = store.Options(add_series=True, yes=True)
PLAN = """
name = "desk"
[[series]]
name = "pellets_fob"
sign = "positive"
[[series]]
name = "freight"
sign = "positive"
clock = "act365"
[[series]]
name = "tide"
sign = "positive"
clock = "seconds"
shift = 2.5
[[estimate]]
series = ["*"]
models = MODELS
lookbacks = [15, "all"]
""".replace("MODELS", str(list(MODELS)))


def pulled(count, level=100.0, seed=3, memory=0.7, size=4.0):
    draws = np.random.default_rng(seed).standard_normal(count)
    x, path = 0.0, []
    for draw in draws:
        x = memory * x + draw
        path.append(level + size * x)
    return path


def swinging(count):
    """A path that goes on in its direction for a while."""
    x, v, path = 0.0, 0.0, []
    for draw in np.random.default_rng(3).standard_normal(count):
        v = 0.8 * v - 0.15 * x + draw
        x += v
        path.append(100.0 + x)
    return path


def suited(model):
    """A path on which all parameters of a model can be told."""
    match model:
        case "inertial":
            return swinging(120)
        case "quartic":
            return pulled(120, memory=0.93, size=2.0, seed=4)
        case "ckls":
            return np.exp(pulled(120, level=1.0, memory=0.93, size=0.05)).tolist()
    return pulled(40)


@pytest.fixture(scope="module")
def book(tmp_path_factory):
    """Three series under three clocks, those that count time with gaps; a correction of an old value in run 2."""
    path = tmp_path_factory.mktemp("functions") / "desk.duckdb"
    store.create(path)
    lots = [days(name, pulled(60, seed=seed)) for seed, name in enumerate(("pellets_fob", "freight", "tide"))]
    gappy = [lots[0], *(one.filter(pl.int_range(pl.len()) % 6 != 4) for one in lots[1:])]
    with store.writing(path, at=MONDAY) as work:
        work.ingest(pl.concat(gappy), ADDING, name="first")
        work.refresh(parse_plan(PLAN, "the plan"))
    with store.writing(path, at=MONDAY + timedelta(days=1)) as work:
        work.ingest(pl.concat([days(name, [91.0], 55) for name in ("pellets_fob", "freight", "tide")]), name="second")
        work.refresh(parse_plan(PLAN.replace("shift = 2.5", "shift = 3.5"), "the plan"))
    return path


@pytest.fixture(scope="module")
def con(book):
    with store.connect(book) as con:
        yield con


def one(con, sql, values=None):
    ((value,),) = con.execute(sql, values).fetchall()
    return value


def bits(value):
    return struct.pack("<d", value) if isinstance(value, float) else value


def columns_of(model):
    return ["n", *(column.name for column in MODELS[model].columns), "status"]


@pytest.mark.parametrize("model", MODEL_NAMES)
def test_fit_is_the_estimators_fit_bit_for_bit(con, model):
    x = suited(model)
    found = one(con, f"select fit_{model}(?::double[], 1 / 252)", [x])
    fit = MODELS[model].fit(np.array(x), 1 / 252)
    assert list(found) == columns_of(model)
    for column in MODELS[model].columns:
        expected = float(fit.columns[column.name])
        if column.kind == "boolean":
            assert found[column.name] is (None if math.isnan(expected) else bool(expected))
        elif column.kind == "word":
            assert found[column.name] == (None if math.isnan(expected) else column.words[int(expected)])
        else:
            assert bits(found[column.name]) == (None if math.isnan(expected) else bits(expected)), column.name
    assert (found["n"], found["status"]) == (len(x) - 1, Status(int(fit.status)).word)
    assert found["loglik"] is not None


@pytest.mark.parametrize("model", MODEL_NAMES)
def test_fit_at_counts_the_time_between_observations_in_years_of_365_days(con, model):
    x = suited(model)
    times = [datetime(2024, 1, 1) + timedelta(hours=30 * k + 7 * (k % 3)) for k in range(len(x))]
    found = one(con, f"select fit_{model}_at(?::timestamp[], ?::double[])", [times, x])
    years = [(after - before) / timedelta(days=365) for before, after in itertools.pairwise(times)]
    fit = MODELS[model].fit(np.array(x), np.array(years))
    assert bits(found["loglik"]) == bits(float(fit.loglik))
    last = f"{GIVEN[model][-1]}_upper"
    expected = float(fit.columns[last])
    assert bits(found[last]) == (None if math.isnan(expected) else bits(expected))


@pytest.mark.parametrize("model", [name for name in MODEL_NAMES if not MODELS[name].of_logs])
@pytest.mark.parametrize(("series", "call"), [
    ("pellets_fob", "rolling_{model}(list(value order by observed_at), 1 / 252, 15)"),
    ("freight", "rolling_{model}_at(list(observed_at order by observed_at), list(value order by observed_at), 15)"),
])  # fmt: skip
def test_rolling_gives_the_books_numbers_bit_for_bit(con, model, series, call):
    stored = [column.name for column in MODELS[model].stored]
    found = one(con, f"select {call.format(model=model)} from observation where series = '{series}'")
    names = ", ".join(["n", *stored, "status"])
    rows = con.execute(
        f"select {names} from {model} where series = '{series}' and lookback = 15 order by window_end"
    ).fetchall()
    again = [tuple(fit[name] for name in ("n", *stored, "status")) for fit in found]
    assert len(rows) >= 30
    assert [tuple(map(bits, row)) for row in again] == [tuple(map(bits, row)) for row in rows]


@pytest.mark.parametrize("model", MODEL_NAMES)
@pytest.mark.parametrize("series", ["pellets_fob", "freight", "tide"])
def test_window_fit_gives_the_books_numbers_bit_for_bit(con, series, model):
    """Every window now and at the first run, whose data and shift were others; and the window of all steps."""
    for run, as_of in ((2, ""), (1, ", as_of := '2026-01-05T09:00'")):
        for lookback in (15, 0):
            ends = con.execute(
                f"select distinct window_end from {model}_at_run({run}) where series = ? and lookback = ? order by all",
                [series, lookback],
            ).fetchall()
            for (end,) in ends[::7] + ends[-1:]:
                found = con.execute(
                    f"select parameter, value, se, lower, upper, status, window_end, lookback from "
                    f"window_fit('{series}', '{model}', lookback := {lookback}, window_end := timestamp '{end}'{as_of})"
                ).fetchall()
                expected = con.execute(
                    f"select parameter, value, se, lower, upper, status, window_end, lookback from "
                    f"estimate_at_run({run}) where series = ? and model = ? and lookback = ? and window_end = ?",
                    [series, model, lookback, end],
                ).fetchall()
                for setting in MODELS[model].settings:
                    told = f"select {setting.name} from {model}_at_run({run}) where series = ? and lookback = ?"
                    value = one(con, f"{told} and window_end = ?", [series, lookback, end])
                    expected.append((setting.name, value, None, None, None, *expected[0][5:]))
                assert sorted(tuple(map(bits, row)) for row in found) == sorted(
                    tuple(map(bits, row)) for row in expected
                ), end


def test_window_fit_takes_by_default_what_latest_speaks_of(con):
    found = con.execute("select distinct lookback, window_end from window_fit('pellets_fob', 'ou')").fetchall()
    assert found == con.execute("select lookback, window_end from latest where series = 'pellets_fob'").fetchall()


@pytest.mark.parametrize(("end", "last"), [
    ("'2024-02-10'", "2024-02-10"), ("date '2024-02-10'", "2024-02-10"), ("timestamp '2024-02-10'", "2024-02-10"),
    ("'2024-02-10T00:00+01:00'", "2024-02-09"), ("'2024-02-10T23:00-02:00'", "2024-02-11"),
])  # fmt: skip
def test_window_fit_takes_its_end_as_text_date_or_time_and_minds_the_zone(con, end, last):
    found = con.execute(
        f"select distinct window_end::date::varchar from window_fit('pellets_fob', 'ou', window_end := {end})"
    )
    assert found.fetchall() == [(last,)]


@pytest.mark.parametrize(("how", "status", "n"), [
    ("lookback := 1000", "too_short", 59), ("lookback := 0", "ok", 59), ("lookback := -4", "out_of_range", 59),
    ("lookback := 3", "too_short", 3), ("window_end := '1999-01-01'", "too_short", 0),
    ("as_of := '1999-01-01'", None, None),
])  # fmt: skip
def test_window_fit_of_what_is_not_there_has_a_status(con, how, status, n):
    found = con.execute(f"select distinct status, n from window_fit('pellets_fob', 'abm', {how})").fetchall()
    assert found == ([] if status is None else [(status, n)])


LONG = ", ".join(["1, 2, 5, 2, 1, 3, 2, 1, 2, 4"] * 3)


@pytest.mark.parametrize("model", MODEL_NAMES)
@pytest.mark.parametrize(("x", "dt", "status"), [
    ("NULL", "1", "too_short"), ("[]", "1", "too_short"), ("[5]", "1", "too_short"), ("[5, 6, 7]", "1", "too_short"),
    (f"[{LONG}, NULL, {LONG}]", "1", "out_of_range"), (f"[{LONG}, 'nan'::double, {LONG}]", "1", "out_of_range"),
    (f"[{LONG}, 'inf'::double, {LONG}]", "1", "out_of_range"), (f"[{', '.join('2' * 30)}]", "1", "flat"),
    (f"[{LONG}]", "0", "out_of_range"), (f"[{LONG}]", "-1", "out_of_range"), (f"[{LONG}]", "'nan'", "out_of_range"),
    (f"[{LONG}]", "'inf'", "out_of_range"), (f"[{LONG}]", "NULL", "out_of_range"),
])  # fmt: skip
def test_a_list_that_cannot_be_fitted_has_a_status(con, model, x, dt, status):
    found = one(con, f"select fit_{model}({x}::double[], {dt}::double)")
    assert found["status"] == status
    assert [value for name, value in found.items() if name not in ("n", "status") and value is not None] == []


TIMES = [f"2024-01-{day:02d}" for day in range(1, 11)]


@pytest.mark.parametrize("times", [
    [*TIMES[:-1], None], [None, *TIMES[1:]], [*TIMES[:4], None, *TIMES[5:]], [*TIMES[:-1], "infinity"],
    ["-infinity", *TIMES[1:]], [*TIMES[:5], TIMES[4], *TIMES[6:]], TIMES[::-1], TIMES[:-1], TIMES[:2], [], None,
])  # fmt: skip
def test_times_that_are_missing_endless_repeated_or_too_few_are_out_of_range(con, times):
    x = [1, 2, 5, 2, 1, 3, 2, 1, 2, 4]
    assert one(con, "select fit_ou_at(?::timestamp[], ?::double[]).status", [times, x]) == "out_of_range"
    statuses = one(con, "select [f.status for f in rolling_ou_at(?::timestamp[], ?::double[], 6)]", [times, x])
    assert statuses == ["out_of_range"]


@pytest.mark.parametrize(("lookback", "statuses"), [
    ("0", ["out_of_range"]), ("-3", ["out_of_range"]), ("NULL", ["out_of_range"]), ("10", ["too_short"]),
    ("2147483647", ["too_short"]), ("3", ["too_short"] * 7),
])  # fmt: skip
def test_a_lookback_that_cannot_be_used_has_a_status(con, lookback, statuses):
    sql = f"select [f.status for f in rolling_abm([1, 2, 5, 2, 1, 3, 2, 1, 2, 4], 1, {lookback})]"
    found = one(con, sql)
    assert found == statuses if lookback != "3" else len(found) == 7


def test_a_value_that_is_missing_spoils_only_the_windows_that_hold_it(con):
    x = pulled(40)
    whole = one(con, "select rolling_ou(?::double[], 0.1, 8)", [x])
    x[20] = None
    holed = one(con, "select rolling_ou(?::double[], 0.1, 8)", [x])
    assert len(holed) == 32
    for at, (fit, other) in enumerate(zip(whole, holed, strict=True)):
        if at <= 20 <= at + 8:
            assert (other["status"], other["sigma"]) == ("out_of_range", None)
        else:
            assert {name: bits(value) for name, value in other.items()} == {
                name: bits(value) for name, value in fit.items()
            }


CLIMBED = ("cir", "ckls", "quartic", "merton", "inertial", "ou_noise")


@pytest.mark.parametrize("model", MODEL_NAMES)
def test_the_loglik_at_the_estimates_is_that_of_the_fit_and_smaller_beside_them(con, model):
    x, names = suited(model), ", ".join(f"f.{name}" for name in GIVEN[model])
    beside = names.replace("f.sigma", "1.05 * f.sigma").replace("f.eta", "1.05 * f.eta")
    at, off, told = con.execute(
        f"select loglik_{model}(x, 0.1, {names}), loglik_{model}(x, 0.1, {beside}), f.loglik "
        f"from (select x, fit_{model}(x, 0.1) as f from (select ?::double[] as x))",
        [x],
    ).fetchone()
    # a batched climb reports the value with the gain that its last step, below 1e-9, promised
    assert at == pytest.approx(told, rel=1e-12, abs=1e-9 if model in CLIMBED else 0)
    assert off < at


def test_a_loglik_on_a_grid_is_the_estimators_row_by_row(con):
    """Lists of different lengths, steps and parameters in one chunk."""
    found = con.execute(
        "select k, loglik_ou([5.0 + (i * 7) % 11 for i in range(3 + k % 5)], 0.1 + k / 100, k / 10, 6, 1 + k / 7) "
        "from range(200) t(k) order by k"
    ).fetchall()
    for k, value in found:
        x = np.array([5.0 + (i * 7) % 11 for i in range(3 + k % 5)])
        expected = float(MODELS["ou"].loglik(x, 0.1 + k / 100, k / 10, 6.0, 1 + k / 7))
        assert value == (None if math.isnan(expected) else pytest.approx(expected, rel=1e-12))


@pytest.mark.parametrize("arguments", [
    "NULL, 1, 1, 2, 3", "[], 1, 1, 2, 3", "[1], 1, 1, 2, 3", "[1, 2, NULL], 1, 1, 2, 3", "[1, 2, 3], 0, 1, 2, 3",
    "[1, 2, 3], NULL, 1, 2, 3", "[1, 2, 3], 1, 1, 2, NULL", "[1, 2, 3], 1, 1, 2, -3",
    "[1, 2, 3], 'inf'::double, 1, 2, 3",
])  # fmt: skip
def test_a_loglik_that_is_not_there_is_null(con, arguments):
    assert one(con, f"select loglik_ou({arguments})") is None


@pytest.mark.parametrize(("name", "measure"), [
    ("realised_variance", realised_variance), ("bipower_variation", bipower_variation)])  # fmt: skip
def test_measures_of_returns_are_the_estimators_whatever_the_lengths(con, name, measure):
    sql = f"select k, {name}([sin(k * i + i) for i in range(k % 37)]) from range(500) t(k) order by k"
    for k, value in con.execute(sql).fetchall():
        expected = float(measure(np.array([math.sin(k * i + i) for i in range(k % 37)])))
        assert value == (None if math.isnan(expected) else pytest.approx(expected, rel=1e-12))
    for dirty in ("NULL", "[]", "[1, NULL]", "[1, 'nan'::double]", "[1, 'inf'::double]"):
        assert one(con, f"select {name}({dirty}::double[])") is None


def test_one_long_list_among_many_short_ones_costs_no_more_room_than_it_has(con):
    """Filled up to the longest, these lists would take 16 GB."""
    sql = (
        "select sum(realised_variance(r)) from (select [1.0] as r from range(2000) "
        "union all select [1.0 for _ in range(1000000)])"
    )
    assert one(con, sql) == 1_002_000


@pytest.mark.parametrize(("sql", "told"), [
    ("select fit_ou(['a'], 1)", "fit_ou(DOUBLE[], DOUBLE)"),
    ("select fit_ou(1.0, 1)", "fit_ou(DOUBLE[], DOUBLE)"),
    ("select fit_ou([1.0])", "fit_ou(DOUBLE[], DOUBLE)"),
    ("select rolling_ou([1.0], 1)", "rolling_ou(DOUBLE[], DOUBLE, INTEGER)"),
    ("select fit_uo([1.0], 1)", "fit_ou"),
    ("select realised_variance(['x'])", "realised_variance(DOUBLE[])"),
    ("select loglik_ou([1.0, 2.0], 1, 2)", "loglik_ou"),
    ("from window_fit('pellets_fob', 'uo')", f"no model is called 'uo'; there are {', '.join(MODELS)}."),
    ("from window_fit('pellets_fob', 'exp_uo')", "no model is called 'exp_uo'; did you mean 'exp_ou'?"),
])  # fmt: skip
def test_wrong_types_and_unknown_models_say_what_is_accepted(con, sql, told):
    with pytest.raises(duckdb.Error) as raised:
        con.execute(sql).fetchall()
    assert told in str(raised.value)
    assert "Traceback" not in str(raised.value)


def test_a_thousand_groups_of_different_lengths_are_fitted_as_each_alone(con):
    rng = np.random.default_rng(8)
    groups = {g: (50 + np.cumsum(rng.standard_normal(20 + g % 37))).tolist() for g in range(1000)}
    frame = pl.DataFrame(
        [(g, i, value) for g, values in groups.items() for i, value in enumerate(values)],
        schema={"g": pl.Int32, "i": pl.Int32, "x": pl.Float64},
        orient="row",
    )
    cursor = con.cursor()
    cursor.register("walk", frame)
    found = dict(cursor.execute("select g, fit_ou(list(x order by i), 0.1) from walk group by g").fetchall())
    assert len(found) == 1000
    for g, values in groups.items():
        fit = MODELS["ou"].fit(np.array(values), 0.1)
        assert found[g]["n"] == len(values) - 1
        assert bits(found[g]["loglik"]) == bits(float(fit.loglik))
        assert bits(found[g]["kappa"]) == bits(float(fit.kappa))


def test_cursors_in_threads_get_the_same_answers(book):
    with store.connect(book) as con:
        sql = "select fit_ou(list(value order by observed_at), 1 / 252) from observation where series = 'pellets_fob'"
        expected = con.execute(sql).fetchall()

        def ask(_):
            cursor = con.cursor()
            return cursor.execute(sql).fetchall(), cursor.execute(
                "select count(*) from window_fit('tide', 'ou')"
            ).fetchall()

        with ThreadPoolExecutor(8) as pool:
            answers = list(pool.map(ask, range(24)))
    assert answers == [(expected, [(3,)])] * 24


def test_two_connections_in_one_process_have_all_functions(book):
    with store.connect(book) as first, store.connect(book) as second:
        sql = "select status, count(*) from window_fit('freight', 'exp_ou') group by all"
        assert first.execute(sql).fetchall() == second.execute(sql).fetchall() == [("ok", 3)]


def test_a_connection_keeps_its_book_and_a_new_one_opens_the_newest(book, tmp_path):
    path = tmp_path / "desk.duckdb"
    path.write_bytes(book.read_bytes())
    sql = "select max(run_id), (select count(*) from observation) from run"
    with store.connect(path) as old:
        before = old.execute(sql).fetchall()
        with store.writing(path) as work:
            work.ingest(days("pellets_fob", [99.0], 60), name="third")
            work.refresh()
        with store.connect(path) as new:
            assert new.execute(sql).fetchall() == [(3, before[0][1] + 1)]
            assert old.execute(sql).fetchall() == before
            assert old.cursor().execute(sql).fetchall() == before
            assert one(new, "select count(*) from window_fit('pellets_fob', 'ou')") == 3


def test_a_connection_cannot_write_the_book(con):
    with pytest.raises(duckdb.Error, match="read-only"):
        con.execute("delete from book.base.observation")
