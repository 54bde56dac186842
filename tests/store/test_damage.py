"""A damaged file: every changed byte in a block that is in use is found, what can still be read is said, and the way
back leads to the same book.
"""

import random
import re
import shutil
from collections import Counter
from pathlib import Path

import duckdb
import pytest
from made_series import days, plan_text, wave

from driftbook import store
from driftbook.store import lock
from driftbook.store.cli import app
from driftbook.store.errors import BookError

SEED = 20261202
HEADERS = 3 * 4096
BLOCK = 256 * 1024
GUIDE = Path(store.__file__).parent / "guide" / "way_back.md"


def blocks_in_use(book):
    """What DuckDB says of itself: the blocks of the columns and those of the list of tables."""
    with duckdb.connect(book, read_only=True) as con:
        names = con.execute("select schema_name || '.' || table_name from duckdb_tables()").fetchall()
        of_columns = {
            block
            for (name,) in names
            for one, more in con.execute(
                f"select block_id, additional_block_ids from pragma_storage_info('{name}') where persistent"
            ).fetchall()
            for block in [one, *(more or [])]
        }
        of_tables = {block for (block,) in con.execute("select block_id from pragma_metadata_info()").fetchall()}
        used, free = con.execute("select used_blocks, free_blocks from pragma_database_size()").fetchone()
    found = (of_columns | of_tables) - {-1}
    assert len(found) == used
    assert HEADERS + (used + free) * BLOCK == book.stat().st_size
    return sorted(found)


def flip(book, place, bit=0):
    with book.open("r+b") as file:
        file.seek(place)
        (byte,) = file.read(1)
        file.seek(place)
        file.write(bytes([byte ^ 1 << bit]))


def verdict(book):
    """What `verify` makes of a book: whole, damaged, or not to be opened at all."""
    try:
        findings = store.verify(book).findings
    except BookError as error:
        return "not opened" if re.search(r"cannot be (opened as a book|read): .*checksum", str(error)) else str(error)
    if not findings:
        return "whole"
    assert "the file is damaged" in findings[0].sentence
    return "damaged"


def flips(book, count, seed):
    """Changes one bit at a time, somewhere in the headers or the blocks in use; how often what was found."""
    draw = random.Random(seed)
    pieces = [(0, HEADERS)] + [(HEADERS + block * BLOCK, BLOCK) for block in blocks_in_use(book)]
    found, where = Counter(), set()
    for _ in range(count):
        start, size = draw.choice(pieces)
        place, bit = start + draw.randrange(size), draw.randrange(8)
        flip(book, place, bit)
        found[verdict(book)] += 1
        where.add(start)
        flip(book, place, bit)
    assert verdict(book) == "whole"
    print(f"\n  {count} flips in {len(where)} of {len(pieces)} pieces: {dict(found)}")
    return found


def test_a_changed_bit_is_found(filled):
    assert set(flips(filled, 40, SEED)) == {"damaged", "not opened"}


@pytest.mark.soak
def test_1000_changed_bits_are_found(filled):
    assert set(flips(filled, 1000, SEED + 1)) == {"damaged", "not opened"}


def test_every_block_in_use_is_read(filled):
    """One bit in the middle of each; those of columns and those of the list of tables."""
    found = Counter()
    for block in blocks_in_use(filled):
        flip(filled, HEADERS + block * BLOCK + BLOCK // 2)
        found[verdict(filled)] += 1
        flip(filled, HEADERS + block * BLOCK + BLOCK // 2)
    assert set(found) == {"damaged", "not opened"}


def test_a_free_block_holds_nothing(book):
    with duckdb.connect(book) as con:
        con.execute("create table t as select random() as a from range(200000)")
    take_in(book, 0)
    with duckdb.connect(book) as con:
        con.execute("drop table t")
        con.execute("checkpoint")
    used = blocks_in_use(book)
    free = set(range((book.stat().st_size - HEADERS) // BLOCK)) - set(used)
    assert free
    for block in free:
        flip(book, HEADERS + block * BLOCK + BLOCK // 2)
    assert verdict(book) == "whole"


def block_of(book, table, column, where="true"):
    with duckdb.connect(book, read_only=True) as con:
        return con.execute(
            f"select block_id from pragma_storage_info('base.{table}') where column_name = '{column}' "
            f"and segment_type <> 'VALIDITY' and persistent and {where}"
        ).fetchone()[0]


@pytest.fixture
def large(book):
    """Two row groups of observations of three series."""
    for name, count in (("pellets_fob", 122_880), ("spark", 40_000), ("peg", 10)):
        with store.writing(book) as work:
            work.ingest(days(name, [float(day % 97) for day in range(count)]), store.Options(add_series=True))
    return book


def test_what_can_still_be_read_is_said(large, capsys):
    flip(large, HEADERS + block_of(large, "observation", "value", "row_group_id = 1") * BLOCK + BLOCK // 2)
    assert app.run(["verify", str(large)]) == 4
    said = capsys.readouterr().out
    hit = re.search(
        r"observation: the file is damaged, (.*) cannot be read; of spark; 2 other series can be read", said
    )
    assert "value" in hit[1].split(", ")
    assert "All other columns and tables can be read. To be whole again, put the last good copy" in said
    assert (
        app.run(["sql", str(large), "select count(*) from observation where series = 'pellets_fob' and value >= 0"])
        == 0
    )
    assert "122880" in capsys.readouterr().out
    assert app.run(["sql", str(large), "select count(take) from base.observation"]) == 0
    assert app.run(["sql", str(large), "select sum(value) from observation"]) == 2
    assert "Corrupt database file" in capsys.readouterr().err


def test_other_commands_say_in_a_sentence_that_the_file_is_damaged(filled, capsys):
    before = filled.read_bytes()
    for table, column in (("observation", "value"), ("setting", "sign"), ("migration", "sha256")):
        flip(filled, HEADERS + block_of(filled, table, column) * BLOCK + BLOCK // 2)
        damaged = filled.read_bytes()
        for words in (["refresh", "--all"], ["reproduce", "--all"]):
            assert app.run([words[0], str(filled), *words[1:]]) == 1
            (sentence,) = capsys.readouterr().err.splitlines()
            assert "damaged" in sentence or "put the last good copy" in sentence, sentence
        assert filled.read_bytes() == damaged
        filled.write_bytes(before)


# what only migrations write


@pytest.mark.parametrize(
    "sql",
    [
        "update base.dictionary_entry set meaning = 'other' where name = 'ou' and column_name is null",
        "delete from base.dictionary_entry where name = 'ou'",
    ],
)
def test_a_changed_dictionary_is_found(filled, sql):
    with duckdb.connect(filled) as con:
        con.execute(sql)
    assert [finding.table_name for finding in store.verify(filled).findings] == ["dictionary_entry"]


# the way back

PLAN = plan_text({"pellets_fob": [8], "spark": [8]})


def take_in(book, first):
    with store.writing(book) as work:
        work.ingest(days("pellets_fob", wave(3, first=first), first), store.Options(add_series=True), name=f"{first}")


def in_force(book):
    """What the book says now, apart from which run said it first."""
    kept = ("observation", "ou", "latest", "refused_row", "series")
    with store.connect(book) as con:
        return {
            name: sorted(con.sql(f"from {name}").to_df().filter(regex="^(?!run_)").map(repr).values.tolist())
            for name in kept
        }


def deliver(inbox, day):
    text = "".join(f"{name},2024-02-{day:02d},{60 + day}.5\n" for name in ("pellets_fob", "spark", "unknown"))
    (inbox / f"2024-02-{day:02d}.csv").write_text(f"series,time,value\n{text}pellets_fob,2024-01-05,{day + 90}\n")


def test_a_good_copy_and_the_deliveries_since_lead_back_to_the_same_book(book, tmp_path, capsys):
    """As the guide says: the whole inbox is given again."""
    inbox, copy = tmp_path / "inbox", tmp_path / "backup.duckdb"
    inbox.mkdir()
    for name in ("pellets_fob", "spark"):
        with store.writing(book) as work:
            work.ingest(days(name, wave(20)), store.Options(add_series=True), name=name)
    for day in range(1, 7):
        deliver(inbox, day)
        with store.writing(book) as work:
            work.refresh(PLAN, inbox=inbox)
        if day == 3:
            shutil.copy(book, copy)
    lost = in_force(book)
    flip(book, HEADERS + block_of(book, "observation", "value") * BLOCK + 1000)
    assert verdict(book) == "damaged"

    shutil.copy(copy, book)
    assert app.run(["verify", str(book)]) == 4
    assert (
        "run 8: the lock file notes that it was made, and the book ends with run 5: an older copy was put here. "
        "Take in again what came after run 5; once a new run is made, this is said no more."
    ) in capsys.readouterr().out
    assert in_force(book) != lost
    assert app.run(["refresh", str(book), "--inbox", str(inbox)]) == 0
    assert in_force(book) == lost
    assert app.run(["verify", str(book)]) == 0
    assert lock.last_look(book).found == "run 6"


def test_the_guide_tells_the_way_back():
    text = GUIDE.read_text()
    assert "driftbook refresh BOOK --inbox FOLDER" in text
    assert "`pragma_storage_info`" in text
