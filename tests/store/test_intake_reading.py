"""How one row is read: the accepted forms of times, numbers and lines, and the reason for each refusal."""

import re
from contextlib import closing
from datetime import UTC, datetime, time, timedelta
from zoneinfo import ZoneInfo

import duckdb
import pytest
from hypothesis import example, given, settings
from hypothesis import strategies as st
from naive_intake import empty_book

from driftbook.store import intake
from driftbook.store.errors import UsageError
from driftbook.store.intake.forms import Form, plain_form
from driftbook.store.intake.numerals import read_number
from driftbook.store.intake.quoting import Broken, split_line
from driftbook.store.intake.reasons import Reason
from driftbook.store.intake.times import read_time
from driftbook.store.intake.zones import plain_days
from driftbook.store.series import Setting, Stamp, add_series
from driftbook.store.sql import query

STAMP = Stamp(1, datetime(2026, 1, 1, tzinfo=UTC))


@pytest.fixture
def con():
    with closing(empty_book()) as con:
        zones = {"gas": "UTC", "spot": "Europe/Berlin"}
        add_series(con, {name: Setting(time_zone=zone) for name, zone in zones.items()}, STAMP)
        yield con


@pytest.fixture(scope="module")
def checks():
    with closing(duckdb.connect()) as con:
        con.execute(query("intake_number_checks"))
        yield con


@pytest.fixture
def take(con, tmp_path):
    """Takes in the text of a file."""

    def take(data: str | bytes, **options):
        path = tmp_path / "delivery.csv"
        path.write_bytes(data if isinstance(data, bytes) else data.encode())
        return intake.take_in(con, path, intake.Options(**options), STAMP)

    return take


def utc(*parts):
    return datetime(*parts)


def refusals(outcome):
    return [(row.line, row.reason) for row in outcome.refused]


@pytest.mark.parametrize(
    ("text", "meant"),
    [
        ("2024-01-31", utc(2024, 1, 31)),
        ("20240131", utc(2024, 1, 31)),
        ("2024/1/31", utc(2024, 1, 31)),
        ("2024-01-31T09:30", utc(2024, 1, 31, 8, 30)),
        ("2024-07-31 09:30:15", utc(2024, 7, 31, 7, 30, 15)),
        ("2024-01-31T09:30:15.25Z", utc(2024, 1, 31, 9, 30, 15, 250_000)),
        ("2024-01-31T09:30:15.123456999Z", utc(2024, 1, 31, 9, 30, 15, 123_456)),
        ("2024-01-31 09:30+05", utc(2024, 1, 31, 4, 30)),
        ("2024-01-31 09:30-0530", utc(2024, 1, 31, 15, 0)),
        ("2024-01-31 09:30+05:45", utc(2024, 1, 31, 3, 45)),
        ("31/1/2024", utc(2024, 1, 31)),
        ("1/31/2024", utc(2024, 1, 31)),
        ("31.01.2024 09:30", utc(2024, 1, 31, 8, 30)),
        ("3/3/2024", utc(2024, 3, 3)),
        ("0001-01-01", utc(1, 1, 1)),
        ("9999-12-31", utc(9999, 12, 31)),
        ("1791-06-01", utc(1791, 6, 1)),
    ],
)
def test_an_accepted_time_means_one_instant_whichever_path_reads_it(take, con, text, meant):
    assert read_time(text, "Europe/Berlin", None) == meant
    assert take(f"series,time,value\nspot,{text},1\n").rows_new == 1
    assert con.execute("select observed_at from base.observation").fetchall() == [(meant,)]


@pytest.mark.parametrize(
    ("text", "reason"),
    [
        ("1/2/85", Reason.AMBIGUOUS_DATE),
        ("13/2/85", Reason.AMBIGUOUS_DATE),
        ("1/2/2024", Reason.AMBIGUOUS_DATE),
        ("2024-02-30", Reason.BAD_TIME),
        ("2024-1-2", Reason.BAD_TIME),
        ("2024-01-02T24:00", Reason.BAD_TIME),
        ("2024-01-02T10:00:60", Reason.BAD_TIME),
        ("2024-01-02T10", Reason.BAD_TIME),
        ("2024-01-02T10:00+24:00", Reason.BAD_TIME),
        ("2024-01-02T10:00 CEST", Reason.BAD_TIME),
        ("1704067200", Reason.BAD_TIME),
        ("240131", Reason.BAD_TIME),
        ("1970 Q1", Reason.BAD_TIME),
        ("0000-01-01", Reason.BAD_TIME),
        ("0001-01-01T00:00+01:00", Reason.BAD_TIME),
        ("10000-01-01", Reason.BAD_TIME),
        ("infinity", Reason.BAD_TIME),
        ("2024-03-31 02:30", Reason.TIME_SKIPPED),
        ("2024-10-27 02:30", Reason.TIME_REPEATED),
    ],
)
def test_a_time_that_is_not_plainly_one_instant_is_refused_with_its_reason(take, text, reason):
    assert read_time(text, "Europe/Berlin", None) == reason
    assert refusals(take(f"series,time,value\nspot,{text},1\n")) == [(2, reason)]


@pytest.mark.parametrize(
    ("text", "dates", "meant"),
    [
        ("1/2/85", "month-first", utc(1985, 1, 2)),
        ("1/2/85", "day-first", utc(1985, 2, 1)),
        ("1/2/68", "day-first", utc(2068, 2, 1)),
        ("10/3/2016 0:00", "month-first", utc(2016, 10, 3)),
        ("2024-01-31", "day-first", utc(2024, 1, 31)),
        ("800102", "%y%m%d", utc(1980, 1, 2)),
        ("02Jan2024", "%d%b%Y", utc(2024, 1, 2)),
        ("2024-01-02 10:00 +0200", "%Y-%m-%d %H:%M %z", utc(2024, 1, 2, 8)),
    ],
)
def test_dates_are_read_as_told(take, con, text, dates, meant):
    assert take(f"series,time,value\ngas,{text},1\n", dates=dates).rows_new == 1
    assert con.execute("select observed_at from base.observation").fetchall() == [(meant,)]


FORMS = ("%d.%m.%Y", "%d/%m/%y %H:%M", "%Y%m%d", "%d%b%Y", "%H:%M:%S %B %d, %Y", "%y%m%d", "%Y-%m", "%m/%d/%Y %H:%M:%S")
LETTERS = "0123456789./: ,JanMrchAug-"


@pytest.fixture(scope="module")
def told_time():
    with closing(duckdb.connect()) as con:
        con.execute(query("intake_told_time"))
        yield lambda text, form: con.execute(
            "select intake_told_time($1, $2, $3)", [text, form, plain_form(form).unpadded]
        ).fetchall()[0][0]


@settings(max_examples=300, deadline=None)
@given(
    form=st.sampled_from(FORMS),
    moment=st.datetimes(datetime(1, 1, 1), datetime(9999, 12, 31)),
    changes=st.lists(st.tuples(st.integers(0, 20), st.sampled_from(["", *LETTERS])), max_size=2),
    unpadded=st.booleans(),
)
@example(form="%y%m%d", moment=datetime(1969, 1, 1), changes=[], unpadded=False)
@example(form="%y%m%d", moment=datetime(2068, 1, 1), changes=[], unpadded=False)
@example(form="%Y-%m", moment=datetime(1, 2, 1), changes=[], unpadded=False)
def test_a_told_form_is_read_in_bulk_only_as_the_careful_reading_reads_it(told_time, form, moment, changes, unpadded):
    text = moment.strftime(form)
    if unpadded:
        text = re.sub(r"\b0(?=\d)", "", text)
    for place, letter in changes:
        text = text[:place] + letter + text[place + 1 :]
    found = told_time(text, form)
    assert found is None or found == read_time(text, "UTC", form)


@pytest.mark.parametrize("form", FORMS)
def test_a_told_form_written_as_it_says_is_read_in_bulk(told_time, form):
    for moment in (datetime(2024, 1, 2), datetime(1999, 12, 31)):
        text = moment.strftime(form)
        assert told_time(text, form) == datetime.strptime(text, form)
    assert plain_form(form).has_clock == (":" in form)
    if plain_form(form).unpadded:
        text = datetime(2024, 1, 1).strftime(plain_form(form).unpadded)
        assert told_time(text, form) == datetime(2024, 1, 1)


@pytest.mark.parametrize(
    "form", ["%d.%m.%Y %z", "%Y-%j", "%I %p %d.%m.%Y", "%%%Y-%m-%d", "%Y-%m-%d %f", "%d.%m.%Y Jänner"]
)
def test_a_form_that_the_two_might_read_differently_is_not_read_in_bulk(form):
    assert plain_form(form) == Form()


def test_a_told_form_is_the_only_accepted_one(take):
    assert refusals(take("series,time,value\ngas,2024-01-02,1\n", dates="%y%m%d")) == [(2, "bad_time")]


@pytest.mark.parametrize("dates", ["dd/mm/yyyy", "%d/%m", "%Q"])
def test_a_form_without_a_year_is_no_form(take, dates):
    with pytest.raises(UsageError, match="strptime form that holds a year"):
        take("series,time,value\ngas,2024-01-02,1\n", dates=dates)


def test_the_zone_told_replaces_the_zone_of_the_series_and_leaves_dates_and_offsets_alone(take, con):
    data = "series,time,value\nspot,2024-01-02 12:00,1\nspot,2024-01-02,2\nspot,2024-01-02T12:00Z,3\n"
    take(data, zone="Asia/Tokyo")
    found = con.execute("select observed_at from base.observation order by value").fetchall()
    assert found == [(utc(2024, 1, 2, 3),), (utc(2024, 1, 2),), (utc(2024, 1, 2, 12),)]


@settings(max_examples=100, deadline=None)
@given(
    hours=st.integers(0, 60 * 365 * 24),
    zone=st.sampled_from(["Europe/Berlin", "Australia/Lord_Howe", "America/Caracas"]),
)
@example(hours=0, zone="Europe/Berlin")
def test_a_local_time_that_exists_once_comes_back_from_utc(hours, zone):
    instant = utc(1965, 1, 1) + timedelta(hours=hours)
    wall = instant.replace(tzinfo=UTC).astimezone(ZoneInfo(zone)).replace(tzinfo=None)
    assert read_time(wall.isoformat(), zone, None) in (instant, Reason.TIME_REPEATED)


@pytest.mark.parametrize(
    "zone",
    [
        "Europe/Berlin",
        "America/New_York",
        "Pacific/Auckland",
        "Pacific/Apia",
        "Australia/Lord_Howe",
        "Africa/Casablanca",
    ],
)
def test_on_a_plain_day_the_bulk_conversion_is_the_careful_one(zone):
    """Looked at where it can go wrong: the plain days beside those that are not."""
    table = plain_days([zone]).to_pydict()
    offsets = dict(zip(table["day"], table["utc_offset"], strict=True))
    day = timedelta(days=1)
    edges = [one for one in offsets if one - day not in offsets or one + day not in offsets]
    assert len(edges) > 5
    for edge in edges:
        for clock in (time(0), time(0, 30), time(3), time(12), time(23, 59, 59)):
            wall = datetime.combine(edge, clock)
            assert read_time(wall.isoformat(), zone, None) == wall - offsets[edge]


@pytest.mark.parametrize(
    ("text", "reason"),
    [
        ("inf", "not_finite"),
        ("-Infinity", "not_finite"),
        ("NaN", "not_finite"),
        ("1e999", "not_finite"),
        ("0x10", "not_a_number"),
        ("1_000", "not_a_number"),
        ('"1,000"', "not_a_number"),
        ("1.000,5", "wrong_field_count"),
        ("NA", "not_a_number"),
        ("+-1", "not_a_number"),
        ("1 000", "not_a_number"),
        ("$1", "not_a_number"),
        ("1e", "not_a_number"),
    ],
)
def test_what_is_no_plain_number_is_refused(take, text, reason):
    assert refusals(take(f"series,time,value\ngas,2024-01-02,{text}\n")) == [(2, reason)]


@settings(max_examples=300, deadline=None)
@given(text=st.text("0123456789+-.eE_infNa xX\t,", max_size=8) | st.floats(allow_nan=True).map(repr))
@example(text="+-1")
@example(text="1e1_0")
@example(text="-.5e+0")
@example(text="1.7976931348623159e308")
def test_the_bulk_check_takes_no_number_that_the_careful_reading_refuses(checks, text):
    sql = "select intake_is_plain_number($1, try_cast($1 as double)), try_cast($1 as double)"
    is_plain, number = checks.execute(sql, [text]).fetchall()[0]
    assert not is_plain or number == read_number(text.strip())


@settings(max_examples=200, deadline=None)
@given(text=st.text("0123456789+-.,eE_infa \t", max_size=8))
@example(text="1,5")
@example(text="1.5")
@example(text="1,5,5")
def test_the_bulk_check_of_decimal_commas_takes_no_number_that_the_careful_reading_refuses(checks, text):
    checks.execute(query("intake_comma_numbers"))
    sql = "select intake_is_plain_number($1, intake_number($1)), intake_number($1)"
    is_plain, number = checks.execute(sql, [text]).fetchall()[0]
    assert not is_plain or number == read_number(text.strip(), ",")


def test_a_bad_bar_refuses_the_row_and_an_empty_one_is_no_harm(take, con):
    data = "series,time,value,open,high,low,volume\ngas,2024-01-02,1,,2,.5,\ngas,2024-01-03,1,x,2,.5,1\n"
    assert refusals(take(data)) == [(3, "not_a_number")]
    assert con.execute("select open, high, low, volume from base.observation").fetchall() == [(None, 2.0, 0.5, None)]


def test_line_numbers_are_physical_and_empty_lines_are_no_rows(take):
    outcome = take("\nseries,time,value\n\ngas,2024-01-02,x\n   \n\ngas,2024-01-03,1\ngas,2024-01-04,y")
    assert (outcome.rows_read, outcome.rows_new) == (3, 1)
    assert refusals(outcome) == [(4, "not_a_number"), (8, "not_a_number")]


def test_a_refused_row_keeps_its_raw_line(take):
    outcome = take('series,time,value\r\n "gas" , 2024-01-02,x \r\n')
    assert outcome.refused[0].text == ' "gas" , 2024-01-02,x '


@pytest.mark.parametrize(
    ("line", "reason"),
    [
        (b"gas,2024-01-02", "wrong_field_count"),
        (b"gas,2024-01-02,1,", "wrong_field_count"),
        (b'"gas,2024-01-02,1', "unfinished_quote"),
        (b'"gas"x,2024-01-02,1', "unfinished_quote"),
        (b"g\xe4s,2024-01-02,1", "not_utf8"),
        (b",2024-01-02,1", "no_series"),
        (b"gas,,1", "no_time"),
        (b"gas,2024-01-02,", "no_value"),
        (b"coal,2024-01-02,1", "unknown_series"),
        (b"n" * 201 + b",2024-01-02,1", "name_too_long"),
        (b"g\x07s,2024-01-02,1", "bad_name"),
    ],
)
def test_a_bad_line_costs_one_line_and_says_why(take, line, reason):
    outcome = take(b"series,time,value\ngas,2024-01-01,1\n" + line + b"\ngas,2024-01-03,1\n")
    assert refusals(outcome) == [(3, reason)]
    assert outcome.rows_new == 2


def test_every_reason_has_a_sentence():
    assert all(reason.sentence.endswith(".") for reason in Reason)


@pytest.mark.parametrize(
    ("text", "fields"),
    [
        ("a, b ,c", ["a", "b", "c"]),
        ('"a, b",c', ["a, b", "c"]),
        ('"say ""x""" , c', ['say "x"', "c"]),
        ('5" pipe,c', ['5" pipe', "c"]),
        ('"",', ["", ""]),
        ('"a\nb",c', ["a\nb", "c"]),
        ('"a', Broken.OPEN),
        ('"a"b,c', Broken.MISPLACED),
    ],
)
def test_a_line_is_split_by_its_quotes(text, fields):
    assert split_line(text, ",") == fields
