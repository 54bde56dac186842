"""`forget` deletes for good: no byte is left, the digest chain is whole, and everything else is as it was."""

import struct

import duckdb
import pytest
from made_series import days, plan_text, wave

from driftbook import store
from driftbook.store.cli import app
from driftbook.store.errors import UsageError
from driftbook.store.forgetting import forget
from driftbook.store.swap import create

ADDING = store.Options(add_series=True)
SECRET = 7391.640625  # a value whose eight bytes stand nowhere else


@pytest.fixture
def desk(tmp_path):
    """Two series over three runs, one of them corrected; `diesel` is no longer in the plan."""
    book = tmp_path / "desk.duckdb"
    create(book)
    with store.writing(book, at="2026-01-05") as work:
        work.ingest(days("pellets_fob", wave(20)), ADDING, name="pellets")
        work.ingest(days("diesel", [*wave(19, 700.0), SECRET]), ADDING, name="diesel")
        work.refresh(plan_text({"pellets_fob": [8], "diesel": [8]}))
    with store.writing(book, at="2026-01-06") as work:
        work.ingest(days("diesel", [701.5], 19), name="correction")
        work.ingest(days("unknown_oil", [55.5]), name="unknown")
        work.refresh()
    with store.writing(book, at="2026-01-07") as work:
        work.refresh(plan_text({"pellets_fob": [8]}), yes=True)
    return book


def ask(book, sql):
    with duckdb.connect(book, read_only=True) as con:
        return con.execute(sql).fetchall()


def of_others(book):
    """Everything that the book says of series other than diesel."""
    sql = "from versions.{} where series <> 'diesel' order by all"
    return [ask(book, sql.format(view)) for view in ("observation", "ou", "latest", "series", "estimate")]


def in_bytes(book, text):
    return text in book.read_bytes()


def as_bytes(value):
    return struct.pack("<d", value)


def test_nothing_of_a_forgotten_series_is_left_in_the_file(desk):
    assert in_bytes(desk, b"diesel")
    assert in_bytes(desk, as_bytes(SECRET))
    forget(desk, "diesel", yes=True)
    assert not in_bytes(desk, as_bytes(SECRET))
    assert ask(desk, "select count(*) from versions.observation where series = 'diesel'") == [(0,)]
    assert ask(desk, "select count(*) from versions.series where series = 'diesel'") == [(0,)]
    # the name still stands where people wrote it: in the plans of the time and in the names of files
    with duckdb.connect(desk) as con:
        con.execute("update base.plan set text = ''")
        con.execute("update base.intake set source = '', options = ''")
        con.execute(f"export database '{desk.parent / 'all'}'")
    told = b"".join(path.read_bytes() for path in (desk.parent / "all").iterdir() if path.suffix == ".csv")
    assert b"diesel" not in told


def test_the_chain_is_whole_and_says_so(desk):
    before = ask(desk, "select digest from run order by run_id")
    done = forget(desk, "diesel", yes=True)
    after = ask(desk, "select digest, kind from run order by run_id")
    assert [digest for digest, _ in after[:-1]] == [digest for (digest,) in before]
    assert after[-1] == (done.run.digest, "forget")
    assert store.verify(desk).findings == []


def test_everything_else_is_unchanged(desk):
    before = of_others(desk)
    forget(desk, "diesel", yes=True)
    assert of_others(desk) == before


def test_a_row_put_back_after_the_forgetting_is_found(desk):
    rows = ask(desk, "select * from base.observation where series_id = 2 order by observed_at limit 1")
    forget(desk, "diesel", yes=True)
    with duckdb.connect(desk) as con:
        con.execute(f"insert into base.observation values ({', '.join('?' * len(rows[0]))})", list(rows[0]))
    assert [(one.table_name, one.run_id) for one in store.verify(desk).findings] == [("observation", 1)]


@pytest.mark.parametrize(
    "change", ["delete from {0}", "update {0} set rows_in = rows_in + 1", "insert into {0} from {0}"]
)
def test_what_was_noted_of_a_forgetting_cannot_be_changed_unseen(desk, change):
    forget(desk, "diesel", before="2024-01-06T12:00", yes=True)
    with duckdb.connect(desk) as con:
        con.execute(change.format("base.forgotten_leaf"))
    assert ("forgotten_leaf", 4) in {(one.table_name, one.run_id) for one in store.verify(desk).findings}


def test_what_is_left_of_a_series_past_is_still_proven(desk):
    done = forget(desk, "diesel", before="2024-01-06T12:00", yes=True)
    assert done.rows["observation"] == 6
    assert ask(desk, "select min(observed_at)::date::varchar from versions.observation where series = 'diesel'") == [
        ("2024-01-07",)
    ]
    assert ask(
        desk, "select count(*) from versions.ou where window_start < '2024-01-06 12:00' and series = 'diesel'"
    ) == [(0,)]
    assert store.verify(desk).findings == []
    with duckdb.connect(desk) as con:
        con.execute("update base.observation set value = value + 1 where series_id = 2 and observed_at = '2024-01-10'")
    assert {(one.table_name, one.series) for one in store.verify(desk).findings} == {("observation", "diesel")}


def test_the_past_can_be_forgotten_twice_and_then_the_whole(desk):
    for before in ("2024-01-04", "2024-01-09", None):
        forget(desk, "diesel", before=before, yes=True)
        assert store.verify(desk).findings == []


def test_the_number_of_a_forgotten_series_is_never_given_again(desk):
    forget(desk, "diesel", yes=True)
    with store.writing(desk) as work:
        work.ingest(days("freight", wave(3)), ADDING, name="freight")
    assert ask(desk, "select series_id from base.series where series = 'freight'") == [(3,)]
    assert store.verify(desk).findings == []


def test_work_goes_on_after_a_forgetting(desk):
    forget(desk, "diesel", yes=True)
    with store.writing(desk) as work:
        work.ingest(days("pellets_fob", [101.25], 20), name="next")
        done = work.refresh()
    assert done.windows_due == 1
    assert store.verify(desk).findings == []


def test_a_book_that_was_rewritten_is_read_by_the_same_clients_as_before(desk):
    before = desk.read_bytes()[8:20]
    forget(desk, "diesel", yes=True)
    assert desk.read_bytes()[8:20] == before  # magic bytes and storage version


# what was refused of it

PLAN = """
name = "desk"
[[series]]
name = "gas"
[[series]]
name = "grö \\"ße"
also_called = ["GAS TTF"]
[[estimate]]
series = ["gas"]
models = ["abm"]
lookbacks = [3]
"""
NAME = 'grö "ße'
HEAD = "series,time,value\n"
# each text that must go or stay has a number of its own, written twice
LONG = f"""{HEAD}gas,2024-01-01,70017001x
"grö ""ße",2024-01-01,70027002x
GAS TTF,2024-01-05,70037003x
"grö ""ße",2024-01-02,1
"grö ""ße",2024-01-02,70047004
gas,2024-01-02,70057005,grö
 "grö ""ße" ,2024-01-09,70067006x
other,2024-01-01,70077007
gas 2,2024-01-01,70087008x
"grö ""ße, 2024-01-03, 70097009
GAS TTF,nodate,70107010
"""
WIDE = """time,gas,GAS TTF,peg
2024-01-03,71017101x,71027102.25,71037103
2024-01-08,5,71047104x,2
2024-01-09,71057105x,3,2
ragged,71067106
"""
GONE_WHOLE = {7002, 7003, 7004, 7006, 7009, 7010, 7011, 7012, 7013, 7101, 7102, 7104, 7105, 7106}
GONE_BEFORE = {7002, 7003, 7004, 7009, 7011, 7012, 7101, 7102}
NUMBERS = {*range(7001, 7014), *range(7101, 7107)}


@pytest.fixture(scope="module")
def _refusing(tmp_path_factory):
    """Rows of a series refused for every kind of reason, under each of its names, before and after it was known."""
    folder = tmp_path_factory.mktemp("refusing")
    book = folder / "desk.duckdb"
    create(book)
    for number, (name, text) in enumerate(
        {"long": LONG, "wide": WIDE, "first": f"{HEAD}GAS TTF,2024-01-04,70117011\n"}.items()
    ):
        (folder / f"{number} {name}.csv").write_text(text, encoding="utf-8")
    (folder / "one.csv").write_text("time,value\n2024-01-04,70127012x\n2024-01-08,70137013x\n")
    (folder / "plan.toml").write_text(PLAN, encoding="utf-8")
    with store.writing(book, at="2026-01-05") as work:
        work.ingest(folder / "2 first.csv")
        work.ingest(folder / "0 long.csv")
    with store.writing(book, at="2026-01-06") as work:
        work.refresh(folder / "plan.toml")
    with store.writing(book, at="2026-01-07") as work:
        work.ingest(folder / "0 long.csv", store.Options(zone="UTC"))
        work.ingest(folder / "1 wide.csv", store.Options(layout="wide"))
        work.ingest(folder / "one.csv", store.Options(series=NAME))
    with store.writing(book, at="2026-01-08") as work:
        work.refresh(plan_text({"gas": [3]}), yes=True)
    return book


@pytest.fixture
def refusing(_refusing, tmp_path):
    book = tmp_path / "desk.duckdb"
    book.write_bytes(_refusing.read_bytes())
    return book


def numbers_in(folder, table="refused_row"):
    """Which of the numbers stand in the bytes of any file of a folder, or are told by the table."""
    bytes_of_all = b"".join(path.read_bytes() for path in folder.iterdir())
    book = folder / "desk.duckdb"
    told = str(ask(book, f"select * from base.{table}"))
    written = {number: 2 * str(number) for number in NUMBERS}
    return {number for number, text in written.items() if text.encode() in bytes_of_all or text in told}


@pytest.mark.parametrize(("before", "gone"), [(None, GONE_WHOLE), ("2024-01-07", GONE_BEFORE)])
def test_what_was_refused_of_a_series_is_gone_and_of_others_is_there(refusing, before, gone):
    assert numbers_in(refusing.parent) == NUMBERS
    places = ask(refusing, "select intake_id, line, cell, reason from base.refused_row where name is null order by all")
    forget(refusing, NAME, before=before, yes=True)
    assert numbers_in(refusing.parent) == NUMBERS - gone
    assert store.verify(refusing).findings == []
    left = ask(refusing, "select intake_id, line, cell, reason from base.refused_row where name is null order by all")
    assert set(left) < set(places)
    wide = (
        "select intake_id, line, cell, reason from base.refused_row where intake_id = 4 and name is null order by all"
    )
    assert set(ask(refusing, wide)) == {place for place in places if place[0] == 4}, "of a wide file only texts go"


def test_a_name_that_went_over_to_another_series_is_that_ones(refusing):
    with store.writing(refusing) as work:
        work.refresh(plan_text({"gas": [3]}, also_called={"gas": "GAS TTF"}))
    forget(refusing, NAME, yes=True)
    assert {7003, 7010} <= numbers_in(refusing.parent)
    assert {7002, 7004, 7006} & numbers_in(refusing.parent) == set()
    assert store.verify(refusing).findings == []


@pytest.mark.parametrize(
    ("arguments", "words"),
    [
        (["diesel"], "cannot be undone; say so with --yes"),
        (["deisel", "--yes"], "did you mean 'diesel'?"),
        (["pellets_fob", "--yes"], "take it out of the plan first"),
        (["diesel", "--before", "2000-01-01", "--yes"], "nothing before 2000-01-01 to forget"),
        (["diesel", "--before", "soon", "--yes"], "is no moment"),
    ],
)
def test_what_cannot_be_forgotten_is_told_in_a_sentence_and_changes_nothing(desk, capsys, arguments, words):
    before = desk.read_bytes()
    assert app.run(["forget", str(desk), *arguments]) == UsageError.exit_code
    assert words in capsys.readouterr().err
    assert desk.read_bytes() == before
