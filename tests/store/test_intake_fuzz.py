"""Mutated files: a sentence at most comes back, every row is counted, and what is taken is what a naive reading takes.

Seed 20260105. The default run tries 300 files, `pytest -m soak` 10 000.
"""

import gzip
import io
import os
import random
from contextlib import closing
from datetime import UTC, date, datetime, timedelta
from pathlib import Path

import polars as pl
import pytest
from naive_intake import NaiveBook, as_book_shows, empty_book, of_book, physical_lines, read_header

from driftbook.store import intake
from driftbook.store.errors import IntakeError, UsageError
from driftbook.store.series import Setting, Stamp, add_series

SEED = 20260105
KNOWN = {
    "gas": Setting(),
    "spot": Setting(time_zone="Europe/Berlin", same_time="last"),
    "mid": Setting(same_time="median"),
}
STAMP = Stamp(1, datetime(2026, 1, 1, tzinfo=UTC))
PIECES = (
    b'"', b'""', b"\n", b"\r", b"\r\n", b",", b";", b"\t", b" ", b"\0", b"\xff", b"\xc3\xa9", b"\xef\xbb\xbf", b"-",
    b".", b"NA", b"n/a", b"1e999", b"inf", b"0x1", b"1_0", b"%", b"\xe2\x82\xac", b"gas", b"mid", b"0001-01-01",
    b"9999-12-31", b"2024-03-31 02:30", b"31.12.2023", b"{", b"}", b"null", b"9" * 400, b'"\n"', b"\xed\xa0\x80",
)  # fmt: skip


def long_rows():
    return [
        (name, str(date(2024, 3, 20) + timedelta(days=day)), str(10 + day / 4), str(day) if day % 3 else "")
        for day in range(12)
        for name in ("gas", "spot", "mid", "other")
    ]


def long_text(end="\n", delimiter=",", quote=""):
    lines = [("series", "time", "value", "volume"), *long_rows()]
    return "".join(delimiter.join(f"{quote}{said}{quote}" for said in line) + end for line in lines)


def wide_text():
    lines = [f"{day}.3.2024;{10 + day},5;NA; {day} ;" for day in range(1, 20)]
    return "\n".join(["time;gas;spot;mid;other", *lines, '"20.3.2024 12:30";"1";"2,25";3;4'])


def frame():
    return pl.DataFrame(long_rows(), schema=["series", "time", "value", "volume"], orient="row").with_columns(
        pl.col("time").str.to_date(), pl.col("value").cast(pl.Float64)
    )


def written(how):
    target = io.BytesIO()
    getattr(frame(), how)(target)
    return target.getvalue()


# (bytes, options, whether a naive line-by-line reading can say what must be taken)
FILES = {
    "comma": (long_text().encode(), {}, True),
    "quoted": (long_text("\r\n", quote='"').encode(), {"blank": ("NA",)}, True),
    "padded": (long_text("\r", delimiter=" ; ").encode(), {"zone": "Europe/Berlin"}, True),
    "wide": (wide_text().encode(), {"layout": "wide", "decimal": ",", "blank": ("NA",), "dates": "day-first"}, True),
    "utf16": (long_text().encode("utf-16"), {}, True),
    "gzip": (gzip.compress(long_text().encode()), {}, False),
    "json": (frame().write_ndjson().encode(), {}, False),
    "parquet": (written("write_parquet"), {}, False),
    "arrow": (written("write_ipc"), {}, False),
    "stream": (written("write_ipc_stream"), {}, False),
}


def mutated(data: bytes, chance: random.Random) -> bytes:
    """A few random changes: bytes flipped, pieces put in, spans cut out, doubled or moved, the end cut off."""
    for _ in range(chance.choice((1, 1, 2, 3, 8))):
        at, length = chance.randrange(len(data) + 1), chance.choice((1, 1, 2, 5, 40, 400))
        span, to = data[at : at + length], chance.randrange(len(data) + 1)
        match chance.randrange(8):
            case 0 | 1 | 2:
                data = data[:at] + chance.choice(PIECES) + data[at:]
            case 3:
                data = data[:at] + chance.choice(PIECES) + data[at + length :]
            case 4:
                data = data[:at] + bytes(byte ^ (1 << chance.randrange(8)) for byte in span) + data[at + length :]
            case 5:
                data = data[:at] + data[at + length :]
            case 6:
                data = data[:to] + span + data[to:]
            case _:
                data = data[: max(at, 20)] if chance.random() < 0.3 else data
    return data


def has_its_header(data: bytes, original: bytes) -> bool:
    """Whether the first line still says which column is what; otherwise there is nothing to compare."""
    if b"\0" in data[:200] and data[:2] not in (b"\xff\xfe", b"\xfe\xff"):
        return False
    headers = []
    for one in (data, original):
        lines = physical_lines(one)
        if not any(text.strip() for text, _ in lines):
            return False
        at, *found = read_header(lines)
        headers.append(found)
        if not all(is_utf8 and "\0" not in text for text, is_utf8 in lines[: at + 1]):
            return False
    return headers[0] == headers[1]


def naive(data, options):
    book = NaiveBook()
    for name, setting in KNOWN.items():
        book.add(name, setting.time_zone, setting.same_time)
    book.take_in(data, 1, **options)
    return as_book_shows(book)


def take(con, path, options):
    """What is taken in of a file into a book that stays empty, or the sentence that says why nothing can be."""
    con.begin()
    try:
        outcome = intake.take_in(con, path, intake.Options(**options), STAMP)
        found = of_book(con)
    except (IntakeError, UsageError) as error:
        return str(error)
    finally:
        con.rollback()
    assert outcome.rows_read == outcome.rows_new + outcome.rows_revised + outcome.rows_same + outcome.rows_refused
    return found


def resident():
    """The memory that this process holds, in MiB."""
    return int(Path("/proc/self/statm").read_text().split()[1]) * os.sysconf("SC_PAGE_SIZE") >> 20


def try_files(con, folder, count, seed):
    """Takes in that many mutated files; gives how many could be compared with a naive reading.

    Memory is flat: from the tenth part of the files on it grows by less than 100 MiB.
    """
    chance = random.Random(seed)
    compared = held = 0
    for number in range(count):
        if number == count // 10:
            held = resident()
        kind = chance.choice(list(FILES))
        original, options, is_text = FILES[kind]
        data = mutated(original, chance)
        path = folder / "mutated"
        path.write_bytes(data)
        said = f"file {number}, {kind}: {data[:4000]!r}"
        found = take(con, path, options)
        if isinstance(found, str):
            assert found.endswith((".", "?")), (found, said)
            assert "\n" not in found, (found, said)
        if is_text and has_its_header(data, original):
            compared += 1
            assert found == naive(data, options), said
    assert resident() - held < 100
    return compared


@pytest.fixture
def con():
    with closing(empty_book()) as con:
        add_series(con, dict(KNOWN), STAMP)
        yield con


def test_300_mutated_files(con, tmp_path):
    assert try_files(con, tmp_path, 300, SEED) > 75


@pytest.mark.soak
def test_10_000_mutated_files(con, tmp_path):
    assert try_files(con, tmp_path, 10_000, SEED + 1) > 2_500
