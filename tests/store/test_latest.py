"""`latest`: what the book says of each series, in which units, and when it says something else."""

import math
from datetime import datetime, timedelta

import duckdb
import polars as pl
import pytest
from desk import MONDAY, POSITIVE, Desk, plan, pulled, wandering
from made_series import days

from driftbook.estimators import MODELS
from driftbook.store.plan import parse_plan

COLUMNS = [
    "series",
    "unit",
    "observed_at",
    "value",
    "stale",
    "lookback",
    "window_end",
    "model",
    "model_weight",
    "volatility",
    "volatility_lower",
    "volatility_upper",
    "volatility_unit",
    "realised_volatility",
    "drift",
    "half_life_days",
    "half_life_days_lower",
    "half_life_days_upper",
    "half_life_unbounded",
    "can_reach_zero",
    "wells",
    "mean_exit_time_days",
    "backtest_zone",
    "alarms",
    "note",
    "run_id",
]


@pytest.fixture
def desk(book):
    return Desk(book)


def test_latest_has_every_column_by_name_and_those_of_later_views_are_null(desk):
    desk.run(days("pellets_fob", pulled(60)), plan({"pellets_fob": POSITIVE}))
    row = desk.latest()
    assert list(row) == COLUMNS
    assert [name for name in ("realised_volatility", "wells", "mean_exit_time_days", "backtest_zone", "alarms")
            if row[name] is not None] == []  # fmt: skip


def test_the_value_and_window_are_those_of_the_latest_observation(desk):
    values = pulled(60)
    desk.run(days("pellets_fob", values), plan({"pellets_fob": POSITIVE}))
    row = desk.latest()
    last = datetime(2024, 1, 1) + timedelta(days=59)
    assert (row["value"], row["observed_at"], row["window_end"], row["lookback"]) == (values[-1], last, last, 20)
    assert (row["unit"], row["run_id"]) == ("EUR/t", 1)


def fit(desk, model):
    """The latest fit of a model, by column."""
    with duckdb.connect(desk.book, read_only=True) as con:
        found = con.execute(f"from {model} order by window_end desc, lookback limit 1")
        return dict(zip([column[0] for column in found.description], found.fetchone(), strict=True))


@pytest.mark.parametrize("model", ["gbm", "exp_ou"])
def test_volatility_of_a_positive_series_is_a_fraction_by_a_model_of_its_logarithm(desk, model):
    values = pulled(60)
    desk.run(days("pellets_fob", values), plan({"pellets_fob": f'{POSITIVE}\nin_force = "{model}"'}))
    row, there = desk.latest(), fit(desk, model)
    assert row["volatility_unit"] == "1/√year"
    assert [row[f"volatility{end}"] for end in ("", "_lower", "_upper")] == [
        there[f"sigma{end}"] for end in ("", "_lower", "_upper")
    ]
    drift = there["mu"] if model == "gbm" else (
        there["kappa"] * (there["theta"] - math.log(values[-1])) + there["sigma"] ** 2 / 2)  # fmt: skip
    assert row["drift"] == pytest.approx(drift, rel=1e-12)


@pytest.mark.parametrize("model", ["abm", "ou"])
def test_volatility_of_a_positive_series_is_a_fraction_also_by_a_model_of_its_level(desk, model):
    values = pulled(90)
    desk.run(days("pellets_fob", values), plan({"pellets_fob": f'{POSITIVE}\nin_force = "{model}"'}, lookbacks=(60,)))
    row, there = desk.latest(), fit(desk, model)
    assert row["volatility_unit"] == "1/√year"
    for end in ("", "_lower", "_upper"):
        assert row[f"volatility{end}"] == pytest.approx(there[f"sigma{end}"] / values[-1], rel=1e-12)
    drift = there["mu"] if model == "abm" else there["kappa"] * (there["theta"] - values[-1])
    assert row["drift"] == pytest.approx(drift / values[-1], rel=1e-12)


@pytest.mark.parametrize(("unit", "told"), [('unit = "EUR/MWh"', "EUR/MWh/√year"), ("", "unit/√year")])
def test_volatility_of_a_series_of_any_sign_is_in_its_unit(desk, unit, told):
    values = pulled(60, level=-3.0)
    desk.run(days("spark", values), plan({"spark": f'{unit}\nin_force = "ou"'}, models=("abm", "ou")))
    row, there = desk.latest("spark"), fit(desk, "ou")
    assert (row["volatility"], row["volatility_unit"]) == (there["sigma"], told)
    assert row["drift"] == pytest.approx(there["kappa"] * (there["theta"] - values[-1]), rel=1e-12)
    assert row["can_reach_zero"] is None


@pytest.mark.parametrize(("clock", "told", "factor"), [
    ("trading", "1/√year", 365.0), ("act365", "1/√year", 365.0), ("seconds", "1/√second", 1 / 86_400),
])  # fmt: skip
def test_half_life_is_in_calendar_days_under_every_clock(desk, clock, told, factor):
    frame = days("pellets_fob", pulled(90))
    frame = frame.filter(pl.int_range(pl.len()) % 5 != 3)  # unequal steps where time is counted
    desk.run(frame, plan({"pellets_fob": f'{POSITIVE}\nin_force = "exp_ou"\nclock = "{clock}"'}, lookbacks=(60,)))
    row, there = desk.latest(), fit(desk, "exp_ou")
    assert there["half_life"] is not None
    assert row["volatility_unit"] == told
    assert row["half_life_days"] == there["half_life"] * factor
    assert row["half_life_days_lower"] == there["half_life_lower"] * factor
    assert row["half_life_unbounded"] is there["half_life_unbounded"]


def test_a_half_life_without_upper_end_says_so(desk):
    desk.run(days("pellets_fob", wandering(60)), plan({"pellets_fob": f'{POSITIVE}\nin_force = "ou"'}))
    row = desk.latest()
    assert row["half_life_unbounded"] is True
    assert row["half_life_days_upper"] is None


def test_the_half_life_is_told_from_the_heaviest_model_with_a_pull_where_that_in_force_has_none(desk):
    desk.run(days("pellets_fob", pulled(60)), plan({"pellets_fob": f'{POSITIVE}\nin_force = "abm"'}))
    row = desk.latest()
    ((heaviest, half_life),) = desk.ask(
        "select f.model, p.half_life from fit f join (select 'ou' as model, half_life, window_end from ou union all "
        "select 'exp_ou', half_life, window_end from exp_ou) p using (model, window_end) "
        "order by f.window_end desc, f.model_weight desc limit 1"
    )
    assert row["model"] == "abm"
    assert heaviest in ("ou", "exp_ou")
    assert row["half_life_days"] == half_life * 365


@pytest.mark.parametrize(("model", "reaches"), [("abm", True), ("gbm", False), ("ou", True), ("exp_ou", False)])
def test_whether_zero_can_be_reached_is_told_for_prices_by_the_model_in_force(desk, model, reaches):
    desk.run(days("pellets_fob", pulled(60)), plan({"pellets_fob": f'{POSITIVE}\nin_force = "{model}"'}))
    assert desk.latest()["can_reach_zero"] is reaches


def test_a_shift_is_taken_back_so_that_fractions_are_of_the_value(desk):
    """Models of X > 0 are fitted to X + shift; the volatility of X itself, over X, is larger by (X + shift)/X."""
    values = pulled(60, level=2.0, size=0.2)
    keys = f'{POSITIVE}\nin_force = "exp_ou"\nshift = 3.0'
    desk.run(days("overnight_rate", values), plan({"overnight_rate": keys}))
    row, there = desk.latest("overnight_rate"), fit(desk, "exp_ou")
    scale = (values[-1] + 3.0) / values[-1]
    pull = there["kappa"] * (there["theta"] - math.log(values[-1] + 3.0)) + there["sigma"] ** 2 / 2
    assert row["volatility"] == pytest.approx(there["sigma"] * scale, rel=1e-12)
    assert row["drift"] == pytest.approx(pull * scale, rel=1e-12)


@pytest.mark.parametrize("last", [0.0, -4.0])
def test_a_price_at_or_below_zero_is_noted_and_nothing_is_told_relative_to_it(desk, last):
    desk.run(days("power_da", [*pulled(60, level=20.0, size=1.0), last]), plan({"power_da": POSITIVE}))
    row = desk.latest("power_da")
    assert row["value"] == last
    assert [row[name] for name in ("volatility", "volatility_lower", "volatility_upper", "drift")] == [None] * 4
    assert row["note"].split("; ")[0] == "not positive"
    assert row["model"] in ("abm", "ou")


def test_a_correction_within_the_window_is_noted_by_the_run_that_took_it_and_no_longer_by_the_next(desk):
    desk.run(days("pellets_fob", pulled(60)), plan({"pellets_fob": POSITIVE}))
    desk.run(days("pellets_fob", [101.5], 50))
    assert desk.latest()["note"].split("; ")[0] == "correction"
    desk.run(days("pellets_fob", [102.5, 99.0], 51))
    assert desk.latest()["note"].split("; ")[0] == "2 corrections"
    desk.run(days("pellets_fob", [100.0], 60))
    assert "correction" not in desk.latest()["note"]


def test_a_correction_before_the_window_is_no_news(desk):
    desk.run(days("pellets_fob", pulled(60)), plan({"pellets_fob": POSITIVE}))
    before = desk.rows()
    desk.run(days("pellets_fob", [101.5], 5))
    assert desk.rows() == before


@pytest.mark.parametrize(("values", "word"), [
    (pulled(9), "too short: 8 steps"),
    ([100.0] * 40, "no variation"),
    ([100.0 + (-1) ** k * (1 + k % 3 / 10) for k in range(40)], "swings from step to step"),
])  # fmt: skip
def test_why_there_are_no_numbers_is_said_in_words(desk, values, word):
    desk.run(days("peg", values), plan({"peg": f'{POSITIVE}\nin_force = "ou"'}, models=("ou",)))
    row = desk.latest("peg")
    assert row["note"] == word
    assert [row[name] for name in ("volatility", "drift", "half_life_days", "model_weight")] == [None] * 4


def test_a_change_of_the_model_in_force_is_noted(desk):
    desk.run(days("pellets_fob", pulled(60)), plan({"pellets_fob": f'{POSITIVE}\nin_force = "ou"'}))
    assert desk.latest()["note"] == ""
    desk.run(plan=plan({"pellets_fob": f'{POSITIVE}\nin_force = "gbm"'}))
    assert (desk.latest()["model"], desk.latest()["note"]) == ("gbm", "model changed from ou")


def test_stale_is_judged_when_read(desk):
    desk.run(days("pellets_fob", pulled(60)), plan({"pellets_fob": f"{POSITIVE}\nstale_after_days = 700"}))
    last = datetime(2024, 1, 1) + timedelta(days=59)
    just, after = last + timedelta(days=700), last + timedelta(days=700, seconds=1)
    assert just > MONDAY.replace(tzinfo=None) + timedelta(days=1)
    stale = "select stale from latest_as_of(?)"
    assert desk.ask(stale, [just.isoformat()]) == [(False,)]
    assert desk.ask(stale, [after.isoformat()]) == [(True,)]
    assert desk.ask("select stale from latest_at_run(1)") == [(False,)]
    ((now,),) = desk.ask("select epoch_us(now()) > epoch_us(?::timestamp)", [after])
    assert desk.ask("select stale from latest") == [(now,)]


def test_the_headline_lookback_is_the_plans_and_the_first_where_a_series_lacks_it(desk):
    lookbacks = '[[estimate]]\nseries = ["peg"]\nmodels = ["ou"]\nlookbacks = [12, 15]\n'
    text = plan({"pellets_fob": POSITIVE, "peg": ""}, lookbacks=(20, 30), estimated="pellets_fob",
                head="headline_lookback = 30").text + lookbacks  # fmt: skip
    desk.run(pl.concat([days("pellets_fob", pulled(60)), days("peg", pulled(60))]), parse_plan(text, "the plan"))
    assert (desk.latest()["lookback"], desk.latest("peg")["lookback"]) == (30, 12)


def test_another_headline_lookback_is_spoken_of_though_no_window_is_due(desk):
    desk.run(days("pellets_fob", pulled(60)), plan({"pellets_fob": POSITIVE}, lookbacks=(20, 30)))
    finished = desk.run(plan=plan({"pellets_fob": POSITIVE}, lookbacks=(20, 30), head="headline_lookback = 30"))
    row = desk.latest()
    assert (row["lookback"], row["run_id"]) == (30, finished.run_id)
    assert desk.ask("select windows_due from run order by run_id desc limit 1") == [(0,)]


def test_a_lookback_that_leaves_the_plan_is_no_longer_spoken_of(desk):
    desk.run(days("pellets_fob", pulled(60)), plan({"pellets_fob": POSITIVE}, lookbacks=(20, 30)))
    desk.run(plan=plan({"pellets_fob": POSITIVE}, lookbacks=(30,)))
    row = desk.latest()
    assert (row["lookback"], row["volatility"] is not None) == (30, True)


def test_a_model_that_leaves_the_plan_is_no_longer_in_force(desk):
    desk.run(days("pellets_fob", pulled(60)), plan({"pellets_fob": POSITIVE}, models=("abm", "ou")))
    before = desk.latest()["model"]
    (other,) = {"abm", "ou"} - {before}
    desk.run(plan=plan({"pellets_fob": POSITIVE}, models=(other,)))
    assert (desk.latest()["model"], desk.latest()["note"]) == (other, f"model changed from {before}")


def test_a_series_that_leaves_the_plan_is_no_longer_spoken_of_and_kept_for_as_of(desk):
    both = pl.concat([days("pellets_fob", pulled(60)), days("peg", pulled(60, 1.0, 0.01))])
    desk.run(both, plan({"pellets_fob": POSITIVE, "peg": POSITIVE}))
    before = desk.latest("peg")
    desk.run(plan=plan({"pellets_fob": POSITIVE}))
    assert desk.ask("select series from latest") == [("pellets_fob",)]
    assert desk.latest("peg", "latest_at_run(1)") | {"stale": None} == before | {"stale": None}
    assert desk.ask("select series, run_from, run_to from versions.latest order by all") == [
        ("peg", 1, 2), ("pellets_fob", 1, None)]  # fmt: skip


def test_a_series_that_is_planned_but_estimated_no_longer_is_not_spoken_of(desk):
    both = pl.concat([days("pellets_fob", pulled(60)), days("peg", pulled(60, 1.0, 0.01))])
    series = {"pellets_fob": POSITIVE, "peg": POSITIVE}
    desk.run(both, plan(series))
    desk.run(plan=plan(series, estimated="pellets_*"))
    assert desk.ask("select series from latest") == [("pellets_fob",)]


def test_a_series_whose_observations_are_all_withdrawn_is_no_longer_spoken_of(desk):
    desk.run(days("pellets_fob", pulled(30)), plan({"pellets_fob": POSITIVE}))
    desk.run(days("pellets_fob", [None] * 30))
    assert desk.ask("select count(*) from latest") == [(0,)]


def test_latest_is_written_only_when_it_says_something_else(desk):
    both = pl.concat([days("pellets_fob", pulled(60)), days("peg", pulled(60, 1.0, 0.01))])
    desk.run(both, plan({"pellets_fob": POSITIVE, "peg": POSITIVE}))
    desk.run(days("peg", [1.0], 60))
    assert desk.ask("select series, run_from, run_to from versions.latest order by all") == [
        ("peg", 1, 2), ("peg", 2, None), ("pellets_fob", 1, None)]  # fmt: skip
    before = desk.rows()
    assert desk.run() is None
    desk.run(everything=True)
    assert desk.rows() == before


def test_latest_at_every_run_and_as_of_every_moment_is_what_was_said_then(desk):
    """Against copies of the view taken after each run."""
    said, sql = {}, "select * exclude (stale) from {} order by series"
    values = pulled(70)
    desk.run(days("pellets_fob", values[:60]), plan({"pellets_fob": POSITIVE}))
    said[1] = desk.ask(sql.format("latest"))
    for run, frame in enumerate([days("pellets_fob", [98.0], 55), days("peg", pulled(40, 1.0, 0.01)),
                                 days("pellets_fob", values[60:65], 60)], start=2):  # fmt: skip
        desk.run(frame, plan({"pellets_fob": POSITIVE, "peg": POSITIVE}) if run == 3 else None)
        said[run] = desk.ask(sql.format("latest"))
    assert len({str(rows) for rows in said.values()}) == 4
    for run, rows in said.items():
        moment = MONDAY + timedelta(days=run)
        assert desk.ask(sql.format(f"latest_at_run({run})")) == rows
        assert desk.ask(sql.format("latest_as_of(?)"), [moment]) == rows
        just_before = desk.ask(sql.format("latest_as_of(?)"), [moment - timedelta(microseconds=1)])
        assert just_before == said.get(run - 1, [])


def test_the_weight_is_that_of_the_view_fit(desk):
    desk.run(days("pellets_fob", pulled(60)), plan({"pellets_fob": POSITIVE}))
    assert desk.ask(
        "select abs(l.model_weight - f.model_weight) < 1e-12 from latest l "
        "join fit f using (series, lookback, window_end, model)"
    ) == [(True,)]


def test_every_model_says_what_latest_needs_of_it():
    for model in MODELS.values():
        assert len(model.local_volatility) == 3
        assert model.local_drift
