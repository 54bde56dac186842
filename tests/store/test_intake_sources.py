"""Sources: formats and delimiters, columns and their names, known intakes, unknown series and their taking up."""

import json
from contextlib import closing
from datetime import UTC, date, datetime, timedelta

import polars as pl
import pytest
from naive_intake import empty_book

from driftbook.store import intake
from driftbook.store.errors import IntakeError, UsageError
from driftbook.store.intake import delimited, reading
from driftbook.store.series import Setting, Stamp, add_series, known_series

ROWS = {
    "series": ["gas", "gas", "oil"],
    "time": [date(2024, 1, 1), date(2024, 1, 2), date(2024, 1, 1)],
    "value": [1.5, 2.0, 3.0],
}


def stamp(run):
    return Stamp(run, datetime(2026, 1, 1, tzinfo=UTC) + timedelta(days=run))


@pytest.fixture
def con():
    with closing(empty_book()) as con:
        add_series(con, {"gas": Setting(), "oil": Setting()}, stamp(1))
        yield con


@pytest.fixture
def take(con, tmp_path):
    """Takes in the text of a file."""

    def take(run, data, name="delivery.csv", **options):
        path = tmp_path / name
        path.write_bytes(data if isinstance(data, bytes) else data.encode())
        return intake.take_in(con, path, intake.Options(**options), stamp(run))

    return take


def observations(con):
    return con.execute(
        "select series, observed_at, value from base.observation join base.series using (series_id) order by all"
    ).fetchall()


EXPECTED = [
    ("gas", datetime(2024, 1, 1), 1.5),
    ("gas", datetime(2024, 1, 2), 2.0),
    ("oil", datetime(2024, 1, 1), 3.0),
]


@pytest.mark.parametrize("delimiter", [",", ";", "\t", "|"])
def test_any_of_four_delimiters_is_found_by_the_header(take, con, delimiter):
    table = pl.DataFrame(ROWS).write_csv(separator=delimiter)
    assert take(1, table).rows_new == 3
    assert observations(con) == EXPECTED


def test_quotes_round_every_field_change_nothing_and_need_no_careful_look(take, con, monkeypatch):
    monkeypatch.setattr(reading, "_look_at_odd", lambda *_: pytest.fail("a simply quoted row was looked at"))
    assert take(1, pl.DataFrame(ROWS).write_csv(quote_style="always")).rows_new == 3
    assert observations(con) == EXPECTED


def test_a_byte_order_mark_and_windows_line_ends_change_nothing(take, con):
    assert take(1, b"\xef\xbb\xbf" + pl.DataFrame(ROWS).write_csv(line_terminator="\r\n").encode()).rows_new == 3
    assert observations(con) == EXPECTED


def test_parquet_and_a_frame_give_what_the_file_gives(con, tmp_path):
    path = tmp_path / "delivery.parquet"
    pl.DataFrame(ROWS).write_parquet(path)
    assert intake.take_in(con, path, intake.Options(), stamp(1)).source == "delivery.parquet"
    assert observations(con) == EXPECTED
    again = intake.take_in(con, pl.DataFrame(ROWS), intake.Options(), stamp(2))
    assert (again.source, again.rows_same) == ("frame", 3)


@pytest.mark.parametrize("unit", ["ms", "us", "ns"])
@pytest.mark.parametrize(("zone", "shift"), [(None, 0), ("Asia/Tokyo", 9)])
def test_times_of_a_frame_keep_their_instant_whatever_their_type(con, unit, zone, shift):
    times = pl.Series([datetime(2024, 1, 2, 12)], dtype=pl.Datetime(unit)).dt.replace_time_zone(zone)
    frame = pl.DataFrame({"series": ["gas"], "time": times, "value": [1.0]})
    con.execute("set TimeZone = 'America/New_York'")
    intake.take_in(con, frame, intake.Options(), stamp(1))
    assert observations(con) == [("gas", datetime(2024, 1, 2, 12 - shift), 1.0)]


def test_a_frame_is_held_to_the_same_rules_and_its_rows_are_counted_from_one(con):
    frame = pl.DataFrame(
        {
            "ticker": ["gas", None, "gas", "gas", "coal"],
            "date": [20240131, 20240131, 20240132, 20240201, 20240201],
            "price": [1.0, 2.0, 3.0, float("nan"), 5.0],
        }
    )
    outcome = intake.take_in(con, frame, intake.Options(), stamp(1))
    assert [(row.line, row.reason) for row in outcome.refused] == [
        (2, "no_series"),
        (3, "bad_time"),
        (4, "not_finite"),
        (5, "unknown_series"),
    ]
    assert outcome.refused[3].text == "coal,20240201,5.0"


def test_columns_are_found_by_their_usual_names_in_any_case(take, con):
    data = "Volume,Date,O,H,L,Close,Ticker,Comment\n10,2024-01-01,1,4,0.5,2,gas,hello\n"
    assert take(1, data).rows_new == 1
    found = con.execute("select value, open, high, low, volume from base.observation").fetchall()
    assert found == [(2.0, 1.0, 4.0, 0.5, 10.0)]


def test_columns_can_be_told_and_then_others_of_a_usual_name_do_not_matter(take, con):
    data = "name,date,price,settle\ngas,2024-01-01,1,2\n"
    with pytest.raises(
        IntakeError, match=r"several columns for the value: 'price' and 'settle'.*--columns value=price"
    ):
        take(1, data)
    assert take(1, data, columns={"value": "settle"}).rows_new == 1
    assert observations(con)[0][2] == 2.0


@pytest.mark.parametrize(
    ("data", "options", "message"),
    [
        (
            "series,when,value\n",
            {},
            r"no column for the time; it has the columns 'series', 'when', 'value'.*--columns time=",
        ),
        ("time,value\n", {}, r"no column for the series.*--series NAME"),
        ("series,time,value\n", {"columns": {"value": "px"}}, r"no column 'px', which --columns value=px names"),
        ("", {}, "is empty; it needs a header line"),
        ("s\0e\0", {}, "no line of UTF-8 text"),
        ('"series,time,value\n', {}, "line 1: the header has a quote that does not end"),
        ("PAR1 and no more", {}, "cannot be read"),
    ],
)
def test_a_source_that_can_not_be_read_at_all_says_why_and_what_to_do(take, data, options, message):
    with pytest.raises(IntakeError, match=message):
        take(1, data.encode("latin-1"), **options)


def test_a_missing_file_is_named(con, tmp_path):
    with pytest.raises(IntakeError, match=r"nowhere.csv cannot be read: No such file"):
        intake.take_in(con, tmp_path / "nowhere.csv", intake.Options(), stamp(1))


def test_a_file_that_is_written_to_meanwhile_is_not_taken_in(take, tmp_path, monkeypatch):
    first_lines = delimited.line_batches

    def and_somebody_writes(file, name):
        with (tmp_path / "delivery.csv").open("a") as other:
            other.write("gas,2024-01-02,2\n")
        return first_lines(file, name)

    monkeypatch.setattr(delimited, "line_batches", and_somebody_writes)
    with pytest.raises(IntakeError, match="changed while it was read"):
        take(1, "series,time,value\ngas,2024-01-01,1\n")


@pytest.mark.parametrize("options", [{"zone": "Mars/Olympus"}, {"columns": {"worth": "x"}}])
def test_an_option_that_makes_no_sense_is_refused(take, options):
    with pytest.raises(UsageError):
        take(1, "series,time,value\n", **options)


def test_the_same_bytes_with_the_same_options_are_known_and_nothing_happens(take, con):
    data = "series,time,value\ngas,2024-01-01,1\ngas,2024-01-02,x\n"
    first = take(1, data)
    again = take(2, data)
    assert (again.known_already, again.intake_id, again.rows_read) == (True, first.intake_id, 0)
    assert con.execute("select count(*) from base.intake").fetchall() == [(1,)]
    assert not take(3, data, zone="Asia/Tokyo").known_already
    assert not take(4, data).known_already, "only the newest intake of the source counts"
    assert not take(5, data, name="other.csv").known_already


def test_the_options_that_change_no_meaning_do_not_make_an_intake_unknown(take):
    data = "series,time,value\ngas,2024-01-01,1\n"
    take(1, data)
    assert take(2, data, yes=True, add_series=True).known_already


def test_each_intake_is_recorded_with_its_counts_bytes_and_options(take, con):
    take(3, "series,time,value\ngas,2024-01-01,1\ngas,2024-01-01,1\ngas,2024-01-02,x\n", dates="day-first")
    (row,) = con.execute("select * exclude (received_at, sha256) from base.intake").fetchall()
    assert row[:2] + row[3:] == (1, "delivery.csv", 3, 1, 0, 1, 1, 3)
    assert json.loads(row[2])["dates"] == "day-first"


def test_all_rows_are_the_series_that_is_named(take, con):
    assert take(1, "date,close\n2024-01-01,1\n", series="gas").rows_new == 1
    assert observations(con)[0][0] == "gas"


def test_a_named_series_has_to_be_known_or_added(take, con):
    data = "date,close\n2024-01-01,1\n"
    with pytest.raises(IntakeError, match=r"no series 'gsa'; did you mean 'gas'\? Otherwise add it with --add-series"):
        take(1, data, series="gsa")
    outcome = take(1, data, series="gsa", add_series=True)
    assert (outcome.series_added, outcome.rows_new) == (("gsa",), 1)


def test_unknown_names_are_added_in_order_of_first_appearance(take, con):
    data = 'series,time,value\n"peg, FR",2024-01-01,1\nbrent,2024-01-01,1\ngas,2024-01-01,1\nalu,2024-01-01,x\n'
    assert take(1, data, add_series=True).series_added == ("peg, FR", "brent", "alu")
    assert list(known_series(con)) == ["gas", "oil", "peg, FR", "brent", "alu"]
    assert known_series(con)["alu"].setting == Setting()


def test_rows_of_unknown_series_are_kept_and_taken_up_once_the_name_is_known(take, con):
    take(1, "series,time,value\npeg,2024-01-02 12:00,1\ngas,2024-01-01,1\npeg,2024-03-31 02:30,2\n")
    take(2, "series,time,value\npeg,2024-01-02 12:00,3\n")
    add_series(con, {"peg": Setting(time_zone="Europe/Berlin")}, stamp(3))
    assert intake.take_up(con, ["peg"], stamp(3)) == 2
    found = con.execute(
        "select observed_at, value, intake_id, take, run_from, run_to from base.observation"
        " where series_id = 3 order by take"
    ).fetchall()
    eleven = datetime(2024, 1, 2, 11)
    assert found == [(eleven, 1.0, 1, 0, 3, 3), (eleven, 3.0, 2, 1, 3, None)]
    refused = con.execute(
        "select intake_id, line, reason, run_from, run_to from base.refused_row order by all"
    ).fetchall()
    assert refused == [
        (1, 2, "unknown_series", 1, 3),
        (1, 4, "time_skipped", 3, None),
        (1, 4, "unknown_series", 1, 3),
        (2, 2, "unknown_series", 2, 3),
    ]
    assert con.execute("select rows_new, rows_refused from base.intake order by intake_id").fetchall() == [
        (1, 2),
        (0, 1),
    ]


def test_rows_of_other_unknown_series_go_on_waiting(take, con):
    take(1, "series,time,value\npeg,2024-01-02,1\nttf,2024-01-02,2\n")
    add_series(con, {"peg": Setting()}, stamp(2))
    assert intake.take_up(con, ["peg"], stamp(2)) == 1
    assert intake.take_up(con, ["peg"], stamp(3)) == 0
    assert con.execute("select name from base.refused_row where run_to is null").fetchall() == [("ttf",)]


def test_rows_taken_up_are_read_with_the_options_of_their_intake(take, con):
    take(1, "series,time,value\npeg,3/4/85,1\n", dates="day-first")
    add_series(con, {"peg": Setting()}, stamp(2))
    intake.take_up(con, ["peg"], stamp(2))
    assert observations(con) == [("peg", datetime(1985, 4, 3), 1.0)]


def test_adding_a_series_takes_up_its_earlier_rows_first(take, con):
    take(1, "series,time,value\npeg,2024-01-02,1\n", name="monday.csv")
    outcome = take(2, "series,time,value\npeg,2024-01-02,2\n", name="tuesday.csv", add_series=True)
    assert (outcome.rows_new, outcome.rows_revised) == (0, 1)


def test_adding_series_on_second_thought_takes_up_the_rows_of_the_known_intake(take, con):
    data = "series,time,value\npeg,2024-01-02,1\n"
    take(1, data)
    outcome = take(2, data, add_series=True)
    assert (outcome.known_already, outcome.series_added) == (True, ("peg",))
    assert [row[0] for row in observations(con)] == ["peg"]


def test_the_outcome_shows_the_first_twenty_refused_rows_and_the_book_has_all(take, con):
    outcome = take(1, "series,time,value\n" + "gas,2024-01-01,x\n" * 30)
    assert [row.line for row in outcome.refused] == list(range(2, 22))
    assert con.execute("select count(*) from base.refused_row").fetchall() == [(30,)]


def called_also(con, name, series_id, run):
    con.execute("insert into base.alias (series_id, name, run_from) values (?, ?, ?)", [series_id, name, run])


def test_another_name_of_a_series_means_that_series(take, con):
    called_also(con, "GAS TTF", 1, 1)
    data = "series,time,value\nGAS TTF,2024-01-01,1\n gas ,2024-01-02,2\n GAS TTF ,13/1/2024,3\n"
    outcome = take(1, data, add_series=True)
    assert (outcome.rows_new, outcome.series_added) == (3, ())
    assert [row[0] for row in observations(con)] == ["gas"] * 3


def test_two_names_of_one_series_are_held_to_its_rule_for_one_time(take, con):
    called_also(con, "GAS TTF", 1, 1)
    outcome = take(
        1, "series,time,value\nGAS TTF,2024-01-01,1\ngas,2024-01-01,2\ngas,2024-01-02,1\nGAS TTF,2024-01-02,1\n"
    )
    assert (outcome.rows_new, outcome.rows_same, outcome.rows_refused) == (1, 1, 2)


def test_all_rows_can_be_the_series_that_another_name_means(take, con):
    called_also(con, "GAS TTF", 1, 1)
    assert take(1, "date,close\n2024-01-01,1\n", series="GAS TTF").rows_new == 1
    assert observations(con)[0][0] == "gas"
    with pytest.raises(IntakeError, match="did you mean 'GAS TTF'"):
        take(2, "date,close\n2024-01-01,1\n", series="GAS TTFF")


def test_rows_that_waited_are_taken_up_once_their_name_means_a_series(take, con):
    take(1, "series,time,value\nGAS TTF,2024-01-01,1\ngas,2024-01-01,1\nGAS TTF,2024-01-02,2\n")
    called_also(con, "GAS TTF", 1, 2)
    assert intake.take_up(con, ["GAS TTF"], stamp(2)) == 2
    assert observations(con) == [("gas", datetime(2024, 1, 1), 1.0), ("gas", datetime(2024, 1, 2), 2.0)]
    assert con.execute("select run_to from base.refused_row").fetchall() == [(2,), (2,)]


def test_a_name_that_no_longer_means_a_series_is_unknown(take, con):
    called_also(con, "GAS TTF", 1, 1)
    con.execute("update base.alias set run_to = 2")
    assert [row.reason for row in take(2, "series,time,value\nGAS TTF,2024-01-01,1\n").refused] == ["unknown_series"]
