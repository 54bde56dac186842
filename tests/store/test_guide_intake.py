"""The guide's tables of what an intake reads and refuses say what the program does, no more and no less."""

import gzip
import re
from contextlib import closing
from datetime import UTC, datetime
from pathlib import Path

import polars as pl
import pytest
from naive_intake import empty_book

from driftbook import store
from driftbook.store import intake
from driftbook.store.intake.columns import USUAL_NAMES
from driftbook.store.intake.numerals import read_number
from driftbook.store.intake.options import BAR_ROLES
from driftbook.store.intake.reasons import Reason
from driftbook.store.intake.times import read_time
from driftbook.store.series import Setting, Stamp, add_series

GUIDE = (Path(store.__file__).parent / "guide" / "intake.md").read_text(encoding="utf-8")
STAMP = Stamp(1, datetime(2026, 1, 1, tzinfo=UTC))
ZONE = "Europe/Berlin"
HEAD = "series,time,value\n"


def table(head):
    """The rows of the table whose first line this is, cell by cell."""
    _, _, rest = GUIDE.partition(f"| {head} |\n")
    assert rest, head
    lines = rest.split("\n\n")[0].splitlines()[1:]
    return [[cell.strip() for cell in line.strip("| ").split(" | ")] for line in lines]


def code(text):
    """What stands in backticks."""
    return re.findall(r"`([^`]+)`", text)


@pytest.fixture
def take(tmp_path):
    with closing(empty_book()) as con:
        add_series(con, {"gas": Setting(time_zone=ZONE), "oil": Setting()}, STAMP)

        def take(data, **options):
            path = tmp_path / "delivery"
            path.write_bytes(data if isinstance(data, bytes) else data.encode())
            return intake.take_in(con, path, intake.Options(**options), STAMP)

        yield take


# formats


def frame():
    return pl.DataFrame({"series": ["gas"], "time": ["2024-01-31"], "value": [1.5]})


def text(delimiter=",", end="\n"):
    return end.join([delimiter.join(("series", "time", "value")), delimiter.join(("gas", "2024-01-31", "1.5")), ""])


def written(how, folder):
    path = folder / "written"
    getattr(frame(), how)(path)
    return path.read_bytes()


def samples(folder):
    delimited = [text(mark).encode() for mark in ",;\t|"] + [text(end=end).encode() for end in ("\n", "\r\n", "\r")]
    encoded = [b"\xef\xbb\xbf" + text().encode(), text().encode("utf-16"), b"\xfe\xff" + text().encode("utf-16-be")]
    tables = [written(how, folder) for how in ("write_parquet", "write_ipc", "write_ipc_stream")]
    plain = {"CSV": delimited + encoded, "JSON lines": [frame().write_ndjson().encode()],
             "Parquet, Arrow (file and stream)": tables}  # fmt: skip
    packed = [gzip.compress(data) for of_format in plain.values() for data in of_format]
    return {
        **plain,
        "any of them as gzip": [*packed, gzip.compress(text().encode()[:9]) + gzip.compress(text().encode()[9:])],
    }


def test_every_format_of_the_table_is_read_and_no_other_stands_there(take, tmp_path):
    told = samples(tmp_path)
    assert [row[0] for row in table("format | what is read")] == list(told)
    for of_format, files in told.items():
        for number, data in enumerate(files):
            outcome = take(data)
            assert (outcome.rows_read, outcome.rows_refused) == (1, 0) or outcome.known_already, (of_format, number)


# columns


def test_the_usual_names_of_columns_are_those_of_the_table_and_each_is_taken_in_any_case(take):
    rows = table("role | columns that are taken without a word, in any case")
    told = {role: set(code(names)) for role, names in rows[:3]}
    bars = dict(zip(BAR_ROLES, (set(code(part)) for part in rows[3][1].split(", ")), strict=True))
    assert rows[3][0] == "open, high, low, volume (if there)"
    assert {**told, **bars} == USUAL_NAMES
    for role, names in told.items():
        for name in names:
            for spelled in (name, name.replace("_", " ").title()):
                head = ",".join(spelled if one == role else one for one in ("series", "time", "value"))
                assert take(f"{head}\ngas,2024-01-31,1\n").rows_refused == 0, spelled


# times


def accepted_times():
    """(form, dates, local time that it means) of each example in the table."""
    rows = table("accepted | meaning")
    dated, clocked, offset, slashed, told, form = (code(row[0]) for row in rows)
    yield from ((one, None) for one in dated + clocked + slashed)
    yield from ((time + mark, None) for time in clocked for mark in offset)
    yield from ((one, dates) for one in told[2:] for dates in ("day-first", "month-first"))
    assert told[:2] == ["--dates day-first", "month-first"]
    yield "240131", form[0].removeprefix("--dates ")


@pytest.mark.parametrize(("form", "dates"), list(accepted_times()))
def test_every_form_of_time_in_the_table_is_read(take, form, dates):
    assert isinstance(read_time(form, ZONE, dates), datetime)
    assert take(f"{HEAD}gas,{form},1\n", dates=dates).rows_refused == 0


def test_what_the_table_says_of_their_meaning_holds():
    assert read_time("2024-01-31", ZONE, None) == datetime(2024, 1, 31)
    assert read_time("2024-01-31T09:30", ZONE, None) == datetime(2024, 1, 31, 8, 30)
    assert read_time("2024-01-31T09:30+02", ZONE, None) == datetime(2024, 1, 31, 7, 30)
    assert [read_time(f"2/1/{year}", ZONE, "day-first").year for year in (69, 99, "00", 68)] == [1969, 1999, 2000, 2068]
    assert read_time("2024-01-31T09:30:15.1234569", "UTC", None).microsecond == 123_456
    assert isinstance(read_time("13/2/2024", ZONE, None), datetime)
    assert read_time("1/2/2024", ZONE, None) == Reason.AMBIGUOUS_DATE


# numbers


def test_the_numbers_that_the_guide_names_are_read_or_refused_as_it_says():
    _, _, rest = GUIDE.partition("## Numbers\n\n")
    yes, _, no = rest.partition("No thousands separators")
    assert [read_number(one) for one in code(yes.partition(". With")[0])] == [1.0, -1.5, 0.5, 0.002]
    assert read_number("1,5", ",") == 1.5
    assert code(no)[:4] == ["0x", "1_000", "inf", "nan"]
    for refused in ("1,000", "1 000", "1'000", "5%", "$5", "€5", "0x1F", "1_000"):
        assert read_number(refused) == Reason.NOT_A_NUMBER
    assert read_number("1.5", ",") == read_number("1.000,5", ",") == Reason.NOT_A_NUMBER
    assert read_number("inf") == read_number("nan") == Reason.NOT_FINITE


# reasons

REFUSED = {
    "not_utf8": (HEAD + "größ,2024-01-01,1\n").encode("latin-1"),
    "bad_json": '{"series":"gas","time":"2024-01-01","value":1}\n{"a":1,"a":2}\n',
    "unfinished_quote": f'{HEAD}"gas,2024-01-01,1\n',
    "wrong_field_count": f"{HEAD}gas,2024-01-01\n",
    "no_series": f"{HEAD} ,2024-01-01,1\n",
    "name_too_long": f"{HEAD}{'n' * 201},2024-01-01,1\n",
    "bad_name": f"{HEAD}g\x07s,2024-01-01,1\n",
    "unknown_series": f"{HEAD}peg,2024-01-01,1\n",
    "no_time": f"{HEAD}gas, ,1\n",
    "bad_time": f"{HEAD}gas,2024-02-30,1\n",
    "ambiguous_date": f"{HEAD}gas,1/2/2024,1\n",
    "time_skipped": f"{HEAD}gas,2024-03-31 02:30,1\n",
    "time_repeated": f"{HEAD}gas,2024-10-27 02:30,1\n",
    "not_a_number": f"{HEAD}gas,2024-01-01,n/a\n",
    "not_finite": f"{HEAD}gas,2024-01-01,1e999\n",
    "no_value": f"{HEAD}gas,2024-01-01,\n",
    "several_values": f"{HEAD}gas,2024-01-01,1\ngas,2024-01-01,2\n",
}


def test_the_table_of_reasons_is_the_programs_own():
    rows = [(code(word)[0], sentence.replace("`", "")) for word, sentence in table("reason | meaning")]
    assert rows == [(reason.value, reason.sentence) for reason in Reason]
    assert list(REFUSED) == [reason.value for reason in Reason]


@pytest.mark.parametrize("reason", REFUSED)
def test_every_reason_can_happen(take, reason):
    outcome = take(REFUSED[reason])
    assert {row.reason for row in outcome.refused} == {reason}
    assert outcome.rows_refused == outcome.rows_read - outcome.rows_new
