"""The wide layout: a column of times, and every other column a series; each cell that says something is a row."""

from contextlib import closing
from datetime import UTC, datetime, timedelta

import polars as pl
import pytest
from naive_intake import empty_book

from driftbook.store import intake
from driftbook.store.errors import IntakeError, UsageError
from driftbook.store.series import Setting, Stamp, add_series

WIDE = {"time": ["2024-01-01", "2024-01-02", "2024-01-03"], "gas": [1.0, None, 3.0], "oil": [4.0, 5.0, None]}


def stamp(run):
    return Stamp(run, datetime(2026, 1, 1, tzinfo=UTC) + timedelta(days=run))


@pytest.fixture
def con():
    with closing(empty_book()) as con:
        add_series(con, {"gas": Setting(), "oil": Setting(same_time="last")}, stamp(1))
        yield con


@pytest.fixture
def take(con, tmp_path):
    """Takes in the text of a wide file, or a wide frame."""

    def take(source, run=1, **options):
        if isinstance(source, str):
            path = tmp_path / "wide.csv"
            path.write_text(source, newline="")
            source = path
        return intake.take_in(con, source, intake.Options(layout="wide", **options), stamp(run))

    return take


def refused(con):
    return con.execute(
        "select line, cell, reason, text from base.refused_row where run_to is null order by intake_id, line, cell"
    ).fetchall()


def observations(con):
    return con.execute(
        "select series, day(observed_at), value from base.observation join base.series using (series_id) order by all"
    ).fetchall()


EXPECTED = [("gas", 1, 1.0), ("gas", 3, 3.0), ("oil", 1, 4.0), ("oil", 2, 5.0)]


@pytest.mark.parametrize("form", ["csv", "parquet", "json", "frame"])
def test_each_cell_is_a_row_and_an_empty_one_says_nothing(take, con, tmp_path, form):
    frame = pl.DataFrame(WIDE)
    if form == "parquet":
        frame.write_parquet(tmp_path / "wide.parquet")
        outcome = take(tmp_path / "wide.parquet")
    else:
        outcome = take({"csv": frame.write_csv(), "json": frame.write_ndjson(), "frame": frame}[form])
    assert (outcome.rows_read, outcome.rows_new) == (4, 4)
    assert observations(con) == EXPECTED


def test_an_empty_cell_withdraws_nothing_and_blank_texts_are_empty_cells(take, con):
    take("time;gas;oil\n2024-01-01;1;2\n")
    outcome = take("time;gas;oil\n2024-01-01; NA ;  \n2024-01-02;n/a;3\n", 2, blank=("NA", "n/a"))
    assert (outcome.rows_read, outcome.rows_new, outcome.rows_refused) == (1, 1, 0)
    assert observations(con) == [("gas", 1, 1.0), ("oil", 1, 2.0), ("oil", 2, 3.0)]


def test_a_refused_cell_keeps_its_line_its_column_and_the_raw_line(take, con):
    outcome = take('oil,time,gas\r\n1,2024-01-01,x\r\n\r\n"2", 32.1.2024,"3"\r\n')
    assert (outcome.rows_read, outcome.rows_new, outcome.rows_refused) == (4, 1, 3)
    assert refused(con) == [
        (2, 3, "not_a_number", "1,2024-01-01,x"),
        (4, 1, "bad_time", '"2", 32.1.2024,"3"'),
        (4, 3, "bad_time", '"2", 32.1.2024,"3"'),
    ]
    assert [(row.line, row.cell) for row in outcome.refused] == [(2, 3), (4, 1), (4, 3)]


def test_a_line_that_is_no_row_of_cells_costs_one_row(take, con):
    outcome = take('time,gas,oil\n2024-01-01,1\n2024-01-02,"1,2\n,3,\n \n2024-01-04,,\n2024-01-05,1,2\n')
    assert (outcome.rows_read, outcome.rows_new) == (5, 2)
    assert [row[:3] for row in refused(con)] == [
        (2, 0, "wrong_field_count"),
        (3, 0, "unfinished_quote"),
        (4, 2, "no_time"),
    ]


def test_the_cells_of_a_long_line_keep_its_beginning_and_the_line_itself_all_of_it(take, con):
    long = "x" * 1000
    take(f"time,gas,oil\n2024-01-01,{long},1\n2024-01-02,{long}\n")
    assert refused(con) == [
        (2, 2, "not_a_number", f"2024-01-01,{long}"[:200] + "…"),
        (3, 0, "wrong_field_count", f"2024-01-02,{long}"),
    ]


def test_cells_of_unknown_columns_wait_for_their_name_one_by_one(take, con):
    outcome = take("time,peg,gas,ttf\n2024-01-01,1,2,3\n2024-01-02,4,,\n2024-01-03,x,5,6\n")
    assert (outcome.rows_new, outcome.rows_refused) == (2, 5)
    add_series(con, {"peg": Setting()}, stamp(2))
    assert intake.take_up(con, ["peg"], stamp(2)) == 2
    assert refused(con) == [
        (2, 4, "unknown_series", "2024-01-01,1,2,3"),
        (4, 2, "not_a_number", "2024-01-03,x,5,6"),
        (4, 4, "unknown_series", "2024-01-03,x,5,6"),
    ]
    assert [row for row in observations(con) if row[0] == "peg"] == [("peg", 1, 1.0), ("peg", 2, 4.0)]


def test_new_columns_are_added_in_their_order(take, con):
    assert take("zinc,time,alu\n1,2024-01-01,2\n", add_series=True).series_added == ("zinc", "alu")


def test_two_cells_of_one_series_and_time_follow_its_rule(take, con):
    con.execute("insert into base.alias (series_id, name, run_from) values (1, 'GAS', 1), (2, 'OIL', 1)")
    outcome = take("time,gas,GAS,oil,OIL\n2024-01-01,1,2,3,4\n")
    assert (outcome.rows_refused, outcome.rows_new, outcome.rows_revised) == (2, 1, 1)
    assert observations(con) == [("oil", 1, 3.0), ("oil", 1, 4.0)]
    in_force = con.execute("select value from base.observation where run_to is null").fetchall()
    assert in_force == [(4.0,)]


def test_the_column_of_times_can_be_told_also_when_it_has_no_name(take, con):
    assert take(",gas\n2024-01-01,1\n", columns={"time": ""}).rows_new == 1
    assert take("day,date,gas\nMon,2024-01-02,1\n", columns={"time": "date"}).rows_read == 2


@pytest.mark.parametrize(
    ("text", "message"),
    [
        ("time,gas,oil, gas\n", "has 2 columns 'gas'; in the wide layout each series has one"),
        ("Time,time,gas\n", "several columns of one name, 'Time' and 'time'"),
        ("date,time,gas\n", "several columns for the time: 'date' and 'time'; say which with --columns time=date"),
        ("when,gas\n", "no column for the time; it has the columns 'when', 'gas'; say which with --columns time=NAME"),
        ("2024-01-01,1\n", "has no header: '2024-01-01'"),
    ],
)
def test_a_header_that_leaves_it_open_is_refused(take, text, message):
    with pytest.raises(IntakeError, match=message):
        take(text)


@pytest.mark.parametrize(
    ("options", "message"),
    [
        ({"series": "gas"}, "--series says that all rows are one series"),
        ({"columns": {"value": "gas"}}, "--columns value=… makes no sense in the wide layout"),
        ({"columns": {"series": "gas", "time": "time"}}, "--columns series=… makes no sense"),
    ],
)
def test_options_of_the_long_layout_make_no_sense(take, options, message):
    with pytest.raises(UsageError, match=message):
        take("time,gas\n", **options)


def test_the_layout_belongs_to_what_a_known_intake_is(take, con, tmp_path):
    take("time,gas\n2024-01-01,1\n")
    assert take("time,gas\n2024-01-01,1\n", 2).known_already
    outcome = intake.take_in(
        con, tmp_path / "wide.csv", intake.Options(series="oil", columns={"value": "gas"}), stamp(3)
    )
    assert (outcome.known_already, outcome.rows_new) == (False, 1)


def test_a_table_of_many_columns_is_read_and_told_of_in_short(take):
    names = [f"s{number}" for number in range(300)]
    frame = pl.DataFrame({"time": ["2024-01-01"], **{name: [1.0] for name in names}})
    assert take(frame.write_csv(), add_series=True).rows_new == 300
    assert take(frame).rows_same == 300
    with pytest.raises(IntakeError, match=r"'s18' and 281 more; say which"):
        take(frame.rename({"time": "when"}))
