"""The set-based intake gives what a naive reading gives, row by row, and so does the careful path alone."""

from contextlib import closing
from datetime import UTC, datetime, timedelta

import pytest
from hypothesis import HealthCheck, example, given, settings
from hypothesis import strategies as st
from naive_intake import NaiveBook, as_book_shows, empty_book, of_book

from driftbook.store import intake
from driftbook.store.intake import reading
from driftbook.store.intake.delimited import DelimitedText
from driftbook.store.series import Setting, Stamp, add_series

KNOWN = {
    "gas": Setting(),
    "spot": Setting(time_zone="Europe/Berlin", same_time="last"),
    "mid": Setting(time_zone="America/New_York", same_time="median"),
}
# few different ones, so that names and times meet again and again
NAMES = (
    "gas",
    "spot",
    "mid",
    "new",
    "spät",
    " gas ",
    '"gas"',
    '"a, b"',
    '"say ""x"""',
    "",
    "\x07bell",
    "x" * 201,
    '"gas',
    '"gas\n"',
    '5" gas',
)
TIMES = (
    "2024-01-02",
    "20240102",
    "2024-01-02T00:00:00Z",
    "2024-01-02 00:00",
    "2024-01-01T19:00:00.0000009-05:00",
    "2024-01-02T06:00:00+0600",
    "2024-03-31 02:30:00",  # skipped in Berlin
    "2024-10-27 02:30:00",  # twice in Berlin
    "2024-11-03 01:30",  # twice in New York
    "2024-06-01 12:00:00.123456789",
    "1960-06-01 12:00",
    "2/1/2024",
    "02.01.2024 9:05",
    "2-1-24 09:05:07",
    "31/2/2024",
    "2024/01/02 25:00",
    "13/1/2024",
    "1/13/2024 09:30",
    "2/1/85",
    "2024/1/2",
    "2024-02-30",
    "2024-1-2",
    "2024-01-02T24:00",
    "0001-01-01T00:00+14:00",
    "0000-01-01",
    "9999-12-31T23:59:59.999999Z",
    "9999-12-31T23:59-01:00",
    " 2024-01-02 ",
    '"2024-01-02"',
    "45321",
    "",
)
NUMBERS = (
    "1",
    "2",
    "2",
    "1.50",
    "-3e2",
    "+4",
    ".5",
    "7.",
    " 1 ",
    "",
    "inf",
    "-NaN",
    "1e999",
    "1_0",
    "0x1f",
    "+-1",
    "1,5",
    '"1,5"',
    "n/a",
    " NA ",
    '"2"',
    "١",
)
NUMBERS_OF_BARS = ("", "", "1", "2.5", "x", "1e999")


@st.composite
def line(draw, width):
    """One line, mostly of the right width and mostly of known names."""
    fields = [
        draw(st.sampled_from(NAMES[:3]) | st.sampled_from(NAMES)),
        draw(st.sampled_from(TIMES[:4]) | st.sampled_from(TIMES)),
        draw(st.sampled_from(NUMBERS[:4]) | st.sampled_from(NUMBERS)),
        *(draw(st.sampled_from(NUMBERS_OF_BARS)) for _ in range(width - 3)),
    ]
    return ",".join(fields).encode()


DIRT = st.sampled_from(
    (
        b"",
        b"  \t",
        b",,",
        b'gas,"2024-01-02',
        b'1"',
        b'"\r"',
        b"1,\r2,",
        b"gas",
        b"gas,2024-01-02",
        b"gas,2024-01-02,1,2,3,4",
        b"g\xe4s,2024-01-02,1",
        b"\x00",
    )
)


@st.composite
def wide_line(draw, width):
    """One line of a wide file."""
    times = st.sampled_from(TIMES[:4]) | st.sampled_from(TIMES)
    cells = st.sampled_from(NUMBERS[:4]) | st.sampled_from(NUMBERS)
    return ",".join([draw(times), *(draw(cells) for _ in range(width - 1))]).encode()


@st.composite
def delivery(draw):
    """A whole file with its options."""
    layout = draw(st.sampled_from(("long", "long", "wide")))
    width = draw(st.sampled_from((3, 3, 5)))
    header = ("series", "time", "value", "open", "volume")[:width]
    if layout == "wide":
        header = ("time", "gas", "new", "mid", "")[:width]
    if draw(st.booleans()):  # a quote early on changes how the bulk reading splits
        header = (f'"{header[0]}"', *header[1:])
    if draw(st.booleans()):  # and so does a space
        header = (*header[:-1], f" {header[-1]} ")
    one = line(width) if layout == "long" else wide_line(width)
    lines = draw(st.lists(st.one_of(one, one, one, one, DIRT), max_size=14))
    end = draw(st.sampled_from((b"\n", b"\r\n", b"\r")))
    data = end.join([",".join(header).encode(), *lines]) + draw(st.sampled_from((b"", end)))
    return data, {
        "layout": layout,
        "zone": draw(st.sampled_from((None, None, "Europe/Berlin", "UTC"))),
        "dates": draw(st.sampled_from((None, None, "day-first", "month-first"))),
        "decimal": draw(st.sampled_from((".", ".", ","))),
        "blank": draw(st.sampled_from(((), (), ("NA", "n/a", "1")))),
        "add_series": draw(st.booleans()),
    }


def take_all(deliveries, folder):
    """A book that took the deliveries, one a run; the name that is unknown at first is made known at the end."""
    con = empty_book()
    add_series(con, dict(KNOWN), stamp(1))
    path = folder / "delivery.csv"
    for run, (data, options) in enumerate(deliveries, start=1):
        path.write_bytes(data)
        # the number in the name makes each its own source: the same bytes twice are to be read twice
        intake.take_in(con, path, intake.Options(**options, yes=True), stamp(run), name=f"delivery {run}")
    late = len(deliveries) + 1
    if not con.execute("select 1 from base.series where series = 'new'").fetchall():
        add_series(con, {"new": Setting(same_time="last", time_zone="Europe/Berlin")}, stamp(late))
        intake.take_up(con, ["new"], stamp(late))
    return con


def take_naively(deliveries):
    book = NaiveBook()
    for name, setting in KNOWN.items():
        book.add(name, setting.time_zone, setting.same_time)
    for run, (data, options) in enumerate(deliveries, start=1):
        book.take_in(data, run, **options)
    if "new" not in book.zones:
        book.add("new", "Europe/Berlin", "last")
        book.take_up(["new"], len(deliveries) + 1)
    return book


def stamp(run):
    return Stamp(run, datetime(2026, 1, 1, tzinfo=UTC) + timedelta(days=run))


@settings(max_examples=35, deadline=None, suppress_health_check=[HealthCheck.function_scoped_fixture])
@given(deliveries=st.lists(delivery(), min_size=1, max_size=3))
@example(deliveries=[(b"series,time,value\ngas,2024-01-02,1\ngas,2024-01-02,\n", {"add_series": False})])
def test_the_book_after_any_deliveries_is_what_a_naive_reading_gives(deliveries, tmp_path):
    with closing(take_all(deliveries, tmp_path)) as con:
        assert of_book(con) == as_book_shows(take_naively(deliveries))


@settings(max_examples=20, deadline=None, suppress_health_check=[HealthCheck.function_scoped_fixture])
@given(deliveries=st.lists(delivery(), min_size=1, max_size=2))
def test_the_careful_path_alone_gives_the_same(deliveries, tmp_path):
    in_bulk = DelimitedText.lines

    def with_care(self, con):
        sql, values = in_bulk(self, con)
        return f"select * replace (false as is_plain) from ({sql})", values

    with pytest.MonkeyPatch.context() as patch:
        patch.setattr(DelimitedText, "lines", with_care)
        with closing(take_all(deliveries, tmp_path)) as con:
            assert con.execute("select count(*) from base.intake").fetchall() == [(len(deliveries),)]
            assert of_book(con) == as_book_shows(take_naively(deliveries))


@pytest.fixture
def only_in_bulk(monkeypatch):
    """The other tests would not notice if everything went the slow way."""
    monkeypatch.setattr(reading, "_look_at_odd", lambda *_: pytest.fail("a plain row was looked at one by one"))


PLAIN = {
    "usual": ({}, ("2024-01-02", "20240103", "2024-01-04T10:00", "2024-01-05T10:00:00.5Z", "2024-01-06 10:00+01:00")),
    "slashes": ({}, ("2024/01/02", "2024/1/3", "2024/1/4 9:30", "2024/01/05 09:30:15")),
    "day first": (
        {"dates": "day-first"},
        ("2/1/2024", "03/01/24", "4.1.2024 9:30", "05-01-2024 09:30:15", "6/1/69", "7/1/68", "2024-01-08"),
    ),
    "month first": ({"dates": "month-first"}, ("1/2/2024", "01/03/24", "1.4.2024 9:30", "1-13-2024 23:59:59")),
    "padded": ({}, (" 2024-01-02 ", "2024-01-03 09:30  ", "2024-01-04T10:00Z ")),
}


@pytest.mark.parametrize("kind", PLAIN)
@pytest.mark.parametrize("layout", ["long", "wide"])
def test_a_plain_file_is_read_in_bulk_without_a_careful_look(tmp_path, only_in_bulk, kind, layout):
    options, times = PLAIN[kind]
    if layout == "long":
        lines = ["series,time,value,open,volume", *(f"{name},{time},-1.5e3,,2" for name in KNOWN for time in times)]
    else:
        lines = [f"time,{','.join(KNOWN)},new", *(f"{time},1,,-1.5e3," for time in times)]
    deliveries = [("\r\n".join([*lines, "", ""]).encode(), {**options, "layout": layout})]
    with closing(take_all(deliveries, tmp_path)) as con:
        assert con.execute("select rows_new from base.intake").fetchall() == [
            (len(times) * (3 if layout == "long" else 2),)
        ]
        assert of_book(con) == as_book_shows(take_naively(deliveries))


def test_commas_blanks_and_withdrawals_are_read_in_bulk(tmp_path, only_in_bulk):
    first = b"series;time;value;open\ngas;2024-01-01;1,5;NA\ngas;2024-01-02;-2,5e1;\nmid;2024-01-02; NA;2\n"
    second = b"series;time;value;open\ngas;2024-01-01;;1\ngas;2024-01-02;NA;"
    deliveries = [(data, {"decimal": ",", "blank": ("NA",)}) for data in (first, second)]
    with closing(take_all(deliveries, tmp_path)) as con:
        assert of_book(con) == as_book_shows(take_naively(deliveries))
