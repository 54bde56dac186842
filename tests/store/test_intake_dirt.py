"""Dirty files: each kind of dirt costs what it must and no more, and says so."""

import random
from contextlib import closing
from datetime import UTC, datetime

import polars as pl
import pytest
from naive_intake import empty_book

from driftbook.store import intake
from driftbook.store.errors import IntakeError
from driftbook.store.intake import lines
from driftbook.store.series import Setting, Stamp, add_series

STAMP = Stamp(1, datetime(2026, 1, 1, tzinfo=UTC))
HEADER = "series,time,value\n"
DAYS = [datetime(2024, 1, day) for day in (1, 2, 3)]


@pytest.fixture
def con():
    with closing(empty_book()) as con:
        add_series(con, {"gas": Setting(), "spot": Setting(time_zone="Europe/Berlin"), "größe": Setting()}, STAMP)
        yield con


@pytest.fixture
def take(con, tmp_path):
    """Takes in the bytes of a file; gives (new, [(line, reason) …])."""

    def take(data: str | bytes, name="delivery.csv", **options):
        path = tmp_path / name
        path.write_bytes(data if isinstance(data, bytes) else data.encode())
        outcome = intake.take_in(con, path, intake.Options(**options), STAMP)
        return outcome.rows_new, [(row.line, row.reason) for row in outcome.refused]

    return take


def days(con):
    return [day for (day,) in con.execute("select observed_at from base.observation order by 1").fetchall()]


THREE = "series,time,value\ngas,2024-01-01,1\ngas,2024-01-02,2\ngröße,2024-01-03,3\n"


@pytest.mark.parametrize(
    "data",
    [
        b"\xef\xbb\xbf" + THREE.encode(),
        THREE.encode("utf-16"),
        b"\xfe\xff" + THREE.encode("utf-16-be"),
        THREE.replace("\n", "\r\n").encode(),
        THREE.replace("\n", "\r").encode(),
        THREE.replace("\n", "\r").encode()[:-1],
        THREE.replace("\n", "\r\n", 1).replace("2\n", "2\r").encode(),
        ("\n\r\r\n  \n" * 300 + THREE).encode(),
    ],
    ids=["bom", "utf-16", "utf-16 big-endian", "crlf", "cr", "cr, no last end", "mixed ends", "blank lines first"],
)
def test_byte_order_marks_and_line_ends_change_nothing(take, con, data):
    assert take(data) == (3, [])
    assert days(con) == DAYS


def test_line_ends_that_fall_on_the_edge_of_a_block_are_seen_once(take, monkeypatch):
    """Whatever the size of the blocks that the file is read in."""
    data = "series,time,value\r\n" + "".join(f"gas,2024-01-{day:02},x\r\n\r" for day in range(1, 20))
    for size in (1, 2, 7, 18, 19, 20, 37):
        monkeypatch.setattr(lines, "_CHUNK", size)
        assert take(data, f"blocks of {size}") == (0, [(2 * day, "not_a_number") for day in range(1, 20)])


def test_latin_1_costs_the_lines_that_are_no_utf_8(take):
    assert take(THREE.encode("latin-1")) == (2, [(4, "not_utf8")])


def test_a_latin_1_header_is_no_header(take):
    with pytest.raises(IntakeError, match=r"no line of UTF-8 text.*save it as CSV in UTF-8"):
        take("größe,time,value\n".encode("latin-1"))


def test_half_a_character_at_the_end_of_utf_16_costs_its_line(take):
    assert take(THREE.encode("utf-16")[:-1]) == (2, [(4, "not_utf8")])


def test_a_quoted_field_may_span_lines_and_its_row_has_its_first_lines_number(take, con):
    note = '"of ""two""\r\nlines, or\n\nfour"'
    data = f"series,time,value,note\ngas,2024-01-01,x,{note}\ngas,2024-01-02,2,{note}\ngas,2024-01-03,y,\n"
    assert take(data) == (1, [(2, "not_a_number"), (10, "not_a_number")])
    refused = con.execute("select text from base.refused_row where line = 2").fetchall()
    assert refused == [(f"gas,2024-01-01,x,{note}",)]


def test_the_name_and_the_value_may_hold_the_line_break(take, con):
    assert take('series,time,value\n"gas\n",2024-01-01,"1\n"\n"gas","2024-01-02\n","\n2"\n') == (2, [])
    assert days(con) == DAYS[:2]


def test_rows_over_lines_are_found_wherever_blocks_end(take, monkeypatch):
    data = "series,time,value,note\n" + "".join(f'gas,2024-01-{day:02},1,"a\nb"\n' for day in range(1, 20))
    for size in (1, 7, 30, 61):
        monkeypatch.setattr(lines, "_CHUNK", size)
        assert take(data, f"blocks of {size}") == (19 if size == 1 else 0, [])


def test_an_unterminated_quote_costs_one_line(take):
    data = HEADER + 'gas,2024-01-01,1\n"gas,2024-01-09,1\ngas,2024-01-02,2\n"gas","2024-01-03",3\n'
    assert take(data) == (3, [(3, "unfinished_quote")])


def test_a_quote_that_nothing_ends_within_a_hundred_lines_costs_one_line(take):
    rows = "".join(f"gas,2024-01-01T{hour % 24:02}:{hour // 24:02},1\n" for hour in range(150))
    assert take(HEADER + '"gas,2024-01-09,1\n' + rows + '",,\n') == (
        150,
        [(2, "unfinished_quote"), (153, "unfinished_quote")],
    )


def test_quotes_that_no_field_begins_with_are_letters(take):
    assert take(HEADER + 'a 5" pipe,2024-01-01,1\n') == (0, [(2, "unknown_series")])


def test_ragged_lines_are_refused_and_the_others_taken(take):
    data = HEADER + "gas,2024-01-01,1\ngas\ngas,2024-01-02,2,\n,,,,\ngas,2024-01-03,3\n"
    assert take(data) == (2, [(3, "wrong_field_count"), (4, "wrong_field_count"), (5, "wrong_field_count")])


def test_a_line_of_10_mb_costs_itself(take):
    long = "x" * 10_000_000
    data = HEADER + f'gas,2024-01-01,1\n{long},2024-01-02,2\n"{long}\ngas,2024-01-02,{long}\ngas,2024-01-03,3\n'
    assert take(data) == (2, [(3, "name_too_long"), (4, "unfinished_quote"), (5, "not_a_number")])


def test_a_line_of_2_mb_of_delimiters_or_quotes_costs_itself(take):
    lines = [mark * (2_000_000 // len(mark)) for mark in (",", '""', '",')]
    data = "\n".join(["time,gas,spot", *lines, "2024-01-01,1,2"])
    assert take(data, layout="wide") == (
        2,
        [(2, "wrong_field_count"), (3, "wrong_field_count"), (4, "wrong_field_count")],
    )


def test_blank_lines_of_tabs_are_no_rows(take):
    assert take("series\ttime\tvalue\n\t\t\n \t\ngas\t2024-01-01\t1\n") == (1, [])


def test_a_line_without_end_is_not_read_for_ever(take, monkeypatch):
    monkeypatch.setattr(lines, "_CHUNK", 1 << 10)
    monkeypatch.setattr(lines, "_LONGEST_LINE", 1 << 12)
    with pytest.raises(IntakeError, match=r"^delivery.csv has a line of more than 0 MiB"):
        take(HEADER + "gas,2024-01-01,1\n" + "x" * 10_000)


def test_nul_bytes_are_letters_that_fit_nowhere(take):
    data = HEADER + "g\0s,2024-01-01,1\ngas,2024-01-01\0,1\ngas,2024-01-01,1\0\n\0\ngas,2024-01-01,1\n"
    assert take(data) == (1, [(2, "bad_name"), (3, "bad_time"), (4, "not_a_number"), (5, "wrong_field_count")])


LIKE_NUMBERS = (
    "1,234.5", "1.234,5", "1 234", "1'234", "1\u00a0234", "12%", "$1", "€1", "1 EUR", "(1)", "1-", "−1", "0x1F",
    "1_000", "n/a", "NA", "N/A", "#N/A", "-", "--", "null", "None", ".", "?", "TRUE", "½", "１", "1e", "1e5.0", "1d3",
)  # fmt: skip


def test_what_only_looks_like_a_number_is_refused(take):
    data = "".join(f"gas;2024-01-01;{text}\n" for text in LIKE_NUMBERS)
    refused = [(line, "not_a_number") for line in range(2, 2 + len(LIKE_NUMBERS))]
    assert take("series;time;value\n" + data) == (0, refused[:20])
    assert take("series;time;value\n" + "\n" * 20 + data[data.index("n/a") - 15 :], "rest") == (
        0,
        [(line + 20, "not_a_number") for line in range(2, 2 + 16)],
    )


LIKE_NOTHING = (
    "n/a", "N/A", "n.a.", "N.A.", "NA", "na", "#N/A", "#NA", "#N/A N/A", "#VALUE!", "#REF!", "#DIV/0!", "null", "NULL",
    "Null", "None", "nil", "none", "missing", "-", "--", "—", "..", "...", "?", "*", "x", ".", "TBD", "closed",
)  # fmt: skip


def test_what_means_nothing_is_refused_in_every_spelling_and_a_blank_when_told(take, con):
    data = "".join(f"gas;2024-01-{day:02};{text}\n" for day, text in enumerate(LIKE_NOTHING, start=1))
    new, refused = take("series;time;value\n" + data)
    assert (new, {reason for _, reason in refused}) == (0, {"not_a_number"})
    told = con.execute("select line, reason from base.refused_row order by line").fetchall()
    assert told == [(line, "not_a_number") for line in range(2, 2 + len(LIKE_NOTHING))]
    new, refused = take("series;time;value\n" + data, "told", blank=LIKE_NOTHING)
    assert (new, {reason for _, reason in refused}) == (0, {"no_value"})


def test_what_is_not_finite_is_refused(take):
    texts = ("inf", "-inf", "Infinity", "nan", "NaN", "-NAN", "1e999", "-1e999", "9" * 400)
    data = "".join(f"gas,2024-01-01,{text}\n" for text in texts)
    assert take(HEADER + data) == (0, [(line, "not_finite") for line in range(2, 11)])


def test_unusual_numbers_are_what_they_say(take, con):
    texts = ("1e-999", "-0", "00012", "1e+2", ".5", "5.", "123456789012345678901234567890")
    data = "".join(f"gas,2024-01-{day:02},{text}\n" for day, text in enumerate(texts, start=1))
    assert take(HEADER + data) == (7, [])
    found = con.execute("select value from base.observation order by observed_at").fetchall()
    assert found == [(float(text),) for text in texts]


def test_a_decimal_comma_is_read_when_told_and_a_point_is_then_no_mark(take, con):
    data = "series;time;value;volume\ngas;2024-01-01;1,5;2\ngas;2024-01-02; -2,5e1 ;3,0\ngas;2024-01-03;1.5;\n"
    assert take(data + "spot;2024-01-01;1.234,5;\nspot;2024-01-02;1,2,3;\n", decimal=",") == (
        2,
        [(4, "not_a_number"), (5, "not_a_number"), (6, "not_a_number")],
    )
    assert con.execute("select value, volume from base.observation order by all").fetchall() == [(-25, 3), (1.5, 2)]


def test_blank_texts_mean_an_empty_value_in_their_very_spelling(take, con):
    assert take(HEADER + "gas,2024-01-01,1\ngas,2024-01-02,2\ngas,2024-01-03,3\n") == (3, [])
    data = 'series,time,value,volume\ngas,2024-01-01, n/a ,NA\ngas,2024-01-02,2,"NA"\nspot,2024-01-02,NA,1\n'
    found = take(data + "gas,2024-01-03,na,\n", blank=("NA", "n/a"), yes=True)
    assert found == (0, [(4, "no_value"), (5, "not_a_number")])
    assert days(con)[1:] == DAYS[1:]
    closed = con.execute("select observed_at from base.observation where run_to is not null").fetchall()
    assert closed == [(DAYS[0],)]


@pytest.mark.parametrize(
    ("told", "form", "first"),
    [("day-first", "{d}/{m}/{y}", "03/04/2024"), ("month-first", "{m}-{d}-{y}", "04-03-2024"),
     (None, "{d}.{m}.{y}", "")],
)  # fmt: skip
def test_slashed_dates_are_read_as_told_or_refused_where_two_readings_are_possible(take, con, told, form, first):
    dates = [form.format(d="03", m="04", y="2024"), form.format(d=3, m=4, y=2024), form.format(d=20, m=4, y=2024)]
    new, refused = take(HEADER + "".join(f"gas,{text},1\n" for text in dates), dates=told)
    if told is None:
        assert (new, refused) == (1, [(2, "ambiguous_date"), (3, "ambiguous_date")])
    else:
        assert (dates[0], refused, set(days(con))) == (first, [], {datetime(2024, 4, 3), datetime(2024, 4, 20)})


def test_the_clock_skips_an_hour_and_repeats_one(take):
    data = "".join(f"spot,2024-{time},1\n" for time in ("03-31 01:59", "03-31 02:00", "03-31 03:00", "10-27 02:59:59"))
    assert take(HEADER + data + "spot,2024-10-27 02:30+02:00,1\nspot,2024-10-27 02:30+01:00,1\n") == (
        4,
        [(3, "time_skipped"), (5, "time_repeated")],
    )


def test_years_run_from_1_to_9999_and_no_further(take, con):
    times = ("0001-01-01", "9999-12-31T23:59:59.999999Z", "0000-12-31", "10000-01-01", "9999-12-31T23:59-01:00")
    assert take(HEADER + "".join(f"gas,{time},1\n" for time in times)) == (
        2,
        [(4, "bad_time"), (5, "bad_time"), (6, "bad_time")],
    )
    assert days(con) == [datetime(1, 1, 1), datetime(9999, 12, 31, 23, 59, 59, 999999)]


@pytest.mark.parametrize(
    ("data", "message"),
    [
        ("gas,2024-01-01,1\n", "has no header: '2024-01-01' stands where the columns' names should"),
        ("gas;x;1.5\n", "has no header: '1.5' stands"),
        ("series,time,value,value\n", "several columns of one name, 'value' and 'value'; rename all but one"),
        ("Time,series,time,value\n", "several columns of one name, 'Time' and 'time'"),
        ("", "is empty; it needs a header line"),
        ("\n \n\r", "is empty; it needs a header line"),
        ('"series,time,value\n', "line 1: the header has a quote that does not end its field"),
        ('"series"x,time,value\n', "line 1: the header has a quote that does not end its field"),
        ("\x1f\u008b", "no column for the series"),
        (b"MZ\x90\0\3\0", "no line of UTF-8 text"),
    ],
)
def test_a_file_without_usable_header_is_told_so(take, data, message):
    with pytest.raises(IntakeError, match=message):
        take(data)


def test_a_header_may_span_lines(take):
    assert take('series,time,"value\r\n(EUR)"\ngas,2024-01-01,x\n', columns={"value": "value\r\n(EUR)"}) == (
        0,
        [(3, "not_a_number")],
    )


def test_a_folder_and_a_missing_file_cannot_be_read(con, tmp_path):
    for path, why in ((tmp_path, "Is a directory"), (tmp_path / "none", "No such file"), ("a\0b", "null byte")):
        with pytest.raises(IntakeError, match=f"cannot be read: .*{why}"):
            intake.take_in(con, path, intake.Options(), STAMP)


def test_parquet_of_wrong_types_is_held_to_the_rules_of_text(con, tmp_path):
    path = tmp_path / "wrong.parquet"
    rows = {"series": ["gas"] * 2, "time": [1.5, None], "value": [[1], [2]], "open": [True, None]}
    pl.DataFrame(rows).write_parquet(path)
    outcome = intake.take_in(con, path, intake.Options(), STAMP)
    assert [row.reason for row in outcome.refused] == ["bad_time", "no_time"]
    pl.DataFrame({**rows, "time": DAYS[:2]}).write_parquet(path)
    outcome = intake.take_in(con, path, intake.Options(), STAMP)
    assert [row.reason for row in outcome.refused] == ["not_a_number"] * 2


def test_a_damaged_parquet_file_cannot_be_read(con, tmp_path):
    path = tmp_path / "damaged.parquet"
    pl.DataFrame({"series": ["gas"] * 999, "time": ["2024-01-01"] * 999, "value": range(999)}).write_parquet(path)
    whole = path.read_bytes()
    chance = random.Random(1)
    for damaged in (whole[:-9], whole[:40], whole[:4] + chance.randbytes(60) + whole[64:]):
        path.write_bytes(damaged)
        with pytest.raises(IntakeError, match=r"^damaged.parquet cannot be read: "):
            intake.take_in(con, path, intake.Options(), STAMP)
