"""Windows that end with each day, week or month, and clocks that count time: against a fit of each window by itself."""

import itertools
import math
import struct
from datetime import UTC, datetime, timedelta
from zoneinfo import ZoneInfo

import duckdb
import numpy as np
import polars as pl
import pytest

from driftbook import store
from driftbook.estimators import MODELS, Status
from driftbook.store.plan import parse_plan

ADDING = store.Options(add_series=True, yes=True)
MONDAY = datetime(2026, 1, 5, 8, tzinfo=UTC)
LOOKBACK = 12
OSLO, KOLKATA = "Europe/Oslo", "Asia/Kolkata"


def plan(every, clock, zone, models=tuple(MODELS), shift=0.0):
    return parse_plan(
        f"""
name = "desk"
[[series]]
name = "power_da"
sign = "positive"
clock = "{clock}"
time_zone = "{zone}"
shift = {shift}
[[estimate]]
series = ["power_da"]
models = {list(models)}
lookbacks = [{LOOKBACK}]
every = "{every}"
""",
        "the plan",
    )


def prices(hours, step=7, seed=2):
    """A value every few hours, with gaps."""
    rng = np.random.default_rng(seed)
    x, rows = 0.0, []
    for hour in range(0, hours, step):
        x = 0.8 * x + float(rng.standard_normal())
        if rng.random() > 0.15:
            rows.append(
                ("power_da", datetime(2024, 1, 27) + timedelta(hours=hour, minutes=(hour * 13) % 60), 60 + 3 * x)
            )
    return pl.DataFrame(
        rows, schema={"series": pl.String, "time": pl.Datetime("us"), "value": pl.Float64}, orient="row"
    )


def in_utc(frame, zone):
    """The same times as UTC instants."""
    return frame.with_columns(pl.col("time").dt.replace_time_zone("UTC"))


def run(book, frame, text, day, name):
    """One run; the first time the plan goes before, for a time zone is told before there are observations."""
    if day == 0:
        with store.writing(book, at=MONDAY - timedelta(days=1)) as work:
            work.refresh(text)
    with store.writing(book, at=MONDAY + timedelta(days=day)) as work:
        work.ingest(frame, ADDING, name=name)
        work.refresh()


def period(time, every, zone):
    local = time.replace(tzinfo=UTC).astimezone(ZoneInfo(zone))
    day = local.date()
    return {"observation": time, "day": day, "week": day.isocalendar()[:2], "month": (day.year, day.month)}[every]


def steps_between(times, clock):
    if clock == "trading":
        return 1 / 252
    unit = timedelta(days=365) if clock == "act365" else timedelta(seconds=1)
    return np.array([(after - before) / unit for before, after in itertools.pairwise(times)])


def told(column, number):
    return column.words[int(number)] if column.kind == "word" and number == number else number


def naive(book, every, clock, zone, model, shift=0.0):
    """{window end: (start, n, status, numbers)} from the observations alone."""
    with duckdb.connect(book, read_only=True) as con:
        known = con.execute("select observed_at, value from observation order by 1").fetchall()
    times, values = [time for time, _ in known], [value for _, value in known]
    last = {period(time, every, zone): at for at, time in enumerate(times)}
    fitted = MODELS[model].of_logs or MODELS[model]  # the series is one of prices
    values = np.array(values) + (shift if fitted.range == "positive" else 0.0)
    settings = fitted.settings_of(values, LOOKBACK)
    found = {}
    for end in sorted(last.values()):
        if end < LOOKBACK:
            continue
        part = slice(end - LOOKBACK, end + 1)
        fit = fitted.rolling_by(settings, values[part], steps_between(times[part], clock), LOOKBACK)
        numbers = [told(column, float(fit.columns[column.name][0])) for column in fitted.stored]
        found[times[end]] = times[end - LOOKBACK], LOOKBACK, Status(int(fit.status[0])).word, numbers
    return found


def in_book(book, model):
    names = ", ".join(column.name for column in MODELS[model].stored)
    with duckdb.connect(book, read_only=True) as con:
        rows = con.execute(
            f"select window_end, window_start, n, status, {names} from base.{model} where run_to is null"
        ).fetchall()
    return {row[0]: (*row[1:4], [float("nan") if one is None else one for one in row[4:]]) for row in rows}


# These models iterate. In windows of a few equal steps, where a likelihood is flat, what they find by sums over windows
# and by a window alone agrees to some 1e-5 of a standard error, and errors and ends of intervals to fewer digits; of
# unequal steps it may be another of several maxima.
ITERATED = ("ckls", "quartic", "inertial", "ou_noise")


def assert_same(found, expected, model, clock, rel=1e-9):
    """Windows and statuses are the same, and numbers but for rounding; of models that iterate, what can be compared."""
    stored = [column.name for column in MODELS[model].stored]
    parameters = [one.name for one in MODELS[model].parameters]
    assert found.keys() == expected.keys()
    for end, row in expected.items():
        assert found[end][:2] == row[:2]
        if model in ITERATED and clock != "trading":
            continue
        assert found[end][2] == row[2]
        one, other = (dict(zip(stored, numbers, strict=True)) for numbers in (found[end][3], row[3]))
        if model not in ITERATED:
            assert one == pytest.approx(other, rel=rel, abs=1e-12, nan_ok=True), end
            continue
        assert one["loglik"] == pytest.approx(other["loglik"], abs=1e-6, nan_ok=True), end
        assert str(one.get("fitted_on")) == str(other.get("fitted_on")), end
        for name in parameters:
            error = 0.0 if math.isnan(other[f"{name}_se"]) else other[f"{name}_se"]
            assert one[name] == pytest.approx(other[name], rel=1e-6, abs=1e-4 * error, nan_ok=True), (end, name)


@pytest.mark.parametrize(("every", "clock", "zone"), [
    ("day", "trading", "UTC"), ("day", "act365", KOLKATA), ("day", "seconds", OSLO), ("week", "act365", OSLO),
    ("week", "trading", KOLKATA), ("month", "seconds", OSLO), ("month", "trading", "UTC"),
    ("observation", "act365", "UTC"), ("observation", "seconds", OSLO),
])  # fmt: skip
def test_windows_are_those_of_the_last_observation_of_each_local_period(book, every, clock, zone):
    """Every model, each window fitted by itself; the clocks go forward on 31 March in Oslo."""
    run(book, in_utc(prices(24 * 75), zone), plan(every, clock, zone), 0, "all")
    for model in MODELS if every != "observation" else ("gbm", "ou"):
        expected = naive(book, every, clock, zone, model)
        assert len(expected) >= 3
        assert_same(in_book(book, model), expected, model, clock)


def test_a_shift_is_added_for_models_of_positive_values_alone(book):
    run(book, in_utc(prices(24 * 20), "UTC"), plan("day", "act365", "UTC", shift=7.5), 0, "all")
    for model in MODELS:
        assert_same(in_book(book, model), naive(book, "day", "act365", "UTC", model, 7.5), model, "act365")


def test_the_local_day_and_not_the_utc_day_ends_a_window(book, tmp_path):
    other = tmp_path / "other.duckdb"
    other.write_bytes(book.read_bytes())
    frame = in_utc(prices(24 * 20), "UTC")
    run(book, frame, plan("day", "trading", "UTC", ("abm",)), 0, "all")
    run(other, frame, plan("day", "trading", KOLKATA, ("abm",)), 0, "all")
    assert in_book(book, "abm").keys() != in_book(other, "abm").keys()


def bits(rows):
    return {end: (*row[:3], [struct.pack("<d", one) for one in row[3]]) for end, row in rows.items()}


@pytest.mark.parametrize(("every", "clock", "zone"), [
    ("day", "act365", OSLO), ("week", "seconds", KOLKATA), ("month", "trading", OSLO), ("observation", "act365", "UTC"),
])  # fmt: skip
def test_daily_refreshes_end_where_refreshing_everything_ends(book, tmp_path, every, clock, zone):
    """Deliveries that end in the middle of periods, a correction, a withdrawal and a late observation."""
    models = ("abm", "exp_ou")
    frame, text = in_utc(prices(24 * 40), zone), plan(every, clock, zone, models)
    cuts = [0, 60, 63, 95, frame.height]
    for day, (first, last) in enumerate(itertools.pairwise(cuts)):
        lot = frame[first:last]
        if day == 2:
            lot = pl.concat([lot, frame[20:22].with_columns(pl.col("value") + 1.5)])
        if day == 3:
            lot = pl.concat([lot, frame[70:71].with_columns(value=None)])
        if day == 1:
            lot = pl.concat([lot, frame[33:34].with_columns(pl.col("time") + timedelta(minutes=11))])
        run(book, lot, text, day, f"lot {day}")
    whole = tmp_path / "whole.duckdb"
    store.create(whole)
    with duckdb.connect(book, read_only=True) as con:
        known = con.sql(
            "select series, observed_at at time zone 'UTC' as time, value from observation order by all"
        ).pl()
    run(whole, known, text, 0, "at once")
    for model in models:
        daily = in_book(book, model)
        assert_same(daily, in_book(whole, model), model, clock, rel=1e-6)
        assert_same(daily, naive(book, every, clock, zone, model), model, clock, rel=1e-6)
    with store.writing(book) as work:
        work.refresh(everything=True)
    assert work.finished.rows_written == 0
    assert store.verify(book).findings == []


def test_the_latest_observation_ends_a_window_that_a_later_one_of_its_period_closes(book):
    frame, text = in_utc(prices(24 * 20), "UTC"), plan("month", "trading", "UTC", ("abm",))
    run(book, frame[:50], text, 0, "first")
    run(book, frame[50:52], text, 1, "second")
    times = frame["time"].dt.replace_time_zone(None).to_list()
    with duckdb.connect(book, read_only=True) as con:
        rows = con.execute("select window_end, run_from, run_to from base.abm order by all").fetchall()
    ended = [row for row in rows if row[0] == times[49]]
    assert ended == [(times[49], 2, 3)]
    assert [row for row in rows if row[2] is None][-1] == (times[51], 3, None)
