"""The inbox: files in the order of their names, read as the plan says; what cannot be read is named and left."""

import gzip
import os

import pytest

from driftbook import store
from driftbook.store import intake
from driftbook.store.errors import UsageError
from driftbook.store.plan import parse_plan

PLAN = """
name = "desk"
[[series]]
name = "gas"
also_called = ["GAS TTF"]
[[series]]
name = "oil"
[[intake]]
files = "wide_*.csv*"
layout = "wide"
dates = "day-first"
[[intake]]
files = "*.txt"
series = "oil"
columns = {value = "px"}
[[estimate]]
series = ["*"]
models = ["abm"]
lookbacks = [20]
"""


@pytest.fixture
def refresh(book, tmp_path):
    """A refresh with files in the inbox; gives what was delivered."""
    inbox = tmp_path / "inbox"
    inbox.mkdir()

    def refresh(files, **options):
        for name, data in files.items():
            (inbox / name).write_bytes(data if isinstance(data, bytes) else data.encode())
        with store.writing(book) as work:
            return work.refresh(parse_plan(PLAN, "the test's plan"), inbox=inbox, **options).delivered

    return refresh


def observations(book):
    with store.connect(book) as con:
        return con.sql("select series, day(observed_at), value from observation order by all").fetchall()


def test_each_file_is_read_as_the_first_entry_that_it_matches_says(refresh, book):
    delivered = refresh(
        {
            "b.txt": "date;px\n2024-01-03;7\n",
            "wide_1.csv": "time;gas;oil\n1/2/2024;1;2\n",
            "wide_2.csv.gz": gzip.compress(b"time;GAS TTF\n2/2/2024;3\n"),
            "a.csv": "series,time,value\nGAS TTF,2024-02-04,5\n",
        }
    )
    assert [outcome.source for outcome in delivered.outcomes] == ["a.csv", "b.txt", "wide_1.csv", "wide_2.csv.gz"]
    assert delivered.rows_refused == 0
    assert observations(book) == [("gas", 1, 1.0), ("gas", 2, 3.0), ("gas", 4, 5.0), ("oil", 1, 2.0), ("oil", 3, 7.0)]


def test_a_file_that_cannot_be_read_is_named_and_left_and_the_others_are_taken(refresh, book):
    good = "series,time,value\ngas,2024-01-01,1\n"
    delivered = refresh(
        {
            "a.csv": "no,header\n",
            "b.csv.gz": gzip.compress(good.encode())[:-4],
            "c.parquet": b"PAR1 broken",
            "d.csv": good,
        }
    )
    assert [outcome.source for outcome in delivered.outcomes] == ["d.csv"]
    assert [sentence.split(" ")[0] for sentence in delivered.left] == ["a.csv", "b.csv.gz", "c.parquet"]
    assert observations(book) == [("gas", 1, 1.0)]
    again = refresh({"a.csv": good})
    assert [(outcome.source, outcome.known_already) for outcome in again.outcomes] == [
        ("a.csv", False),
        ("d.csv", True),
    ]


def test_a_file_whose_name_is_no_text_is_named_and_left(refresh, tmp_path):
    (tmp_path / "inbox" / os.fsdecode(b"\xff.csv")).write_text("series,time,value\ngas,2024-01-01,1\n")
    delivered = refresh({"b.csv": "series,time,value\ngas,2024-01-01,1\n"})
    assert [outcome.source for outcome in delivered.outcomes] == ["b.csv"]
    assert [sentence.endswith("is no UTF-8 text; rename the file.") for sentence in delivered.left] == [True]


def test_hidden_and_unfinished_files_and_folders_are_not_looked_at(refresh, tmp_path):
    (tmp_path / "inbox" / "folder.csv").mkdir()
    delivered = refresh(dict.fromkeys((".a.csv", "b.csv.tmp", "c.csv.part"), "nonsense"))
    assert (delivered.outcomes, delivered.left) == ((), ())


def test_a_folder_that_is_not_there_is_a_wrong_request(book, tmp_path):
    with pytest.raises(UsageError, match="there is no folder"), store.writing(book) as work:
        work.refresh(parse_plan(PLAN, "the test's plan"), inbox=tmp_path / "none")


@pytest.mark.skipif(os.geteuid() == 0, reason="nothing is forbidden to root")
def test_a_folder_that_may_not_be_read_is_a_wrong_request(refresh, tmp_path):
    (tmp_path / "inbox").chmod(0)
    with pytest.raises(UsageError, match="cannot be read: Permission denied"):
        refresh({})


def test_a_known_file_is_not_looked_into_again_and_a_changed_one_is(refresh, monkeypatch):
    """So that an inbox may keep what it had: a year of deliveries costs no more than the reading of their bytes."""
    files = {f"{day:02d}.csv": f"series,time,value\ngas,2024-01-{day:02d},{day}\n" for day in range(1, 11)}
    refresh(files)
    seen = []
    really = intake.take_in
    monkeypatch.setattr(intake, "take_in", lambda con, file, *rest: seen.append(file.name) or really(con, file, *rest))
    again = refresh(
        {"11.csv": "series,time,value\ngas,2024-01-11,11\n", "03.csv": files["03.csv"] + "gas,2024-01-12,1\n"}
    )
    assert seen == ["03.csv", "11.csv"]
    assert [outcome.source for outcome in again.outcomes if not outcome.known_already] == seen
    assert len(again.outcomes) == 11


def test_a_known_file_that_is_to_be_read_in_another_way_is_looked_into_again(refresh, book):
    """Another entry of the plan is then meant; the name tells which."""
    refresh({"a.csv": "series,time,value\ngas,2024-01-01,1\n"})
    with store.writing(book) as work:
        text = PLAN.replace('files = "*.txt"', 'files = "a.csv"').replace(
            'columns = {value = "px"}', 'dates = "day-first"'
        )
        again = work.refresh(parse_plan(text, "the test's plan"), inbox=book.parent / "inbox").delivered
    assert [outcome.known_already for outcome in again.outcomes] == [False]
