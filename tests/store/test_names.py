"""Names are data everywhere: in SQL, in files, in the plan and on the terminal, whatever they are made of."""

import csv
import io
import json
import os
import pty
import subprocess
import sys
from datetime import date, timedelta

import duckdb
import pytest

from driftbook import store
from driftbook.store.cli.app import run
from driftbook.store.swap import create
from driftbook.store.table import harmless

NAMES = [
    'o\'brien "x"; drop table base.series; --',
    "'; copy base.run to 'stolen.csv'; --",
    "../../etc/passwd",
    "C:\\temp\\x",
    "a/b\\c|d\te".replace("\t", " "),
    "\u202egnp.oil\u202c",
    "zero\u200bwidth\u2028line",
    "=cmd|' /C calc'!A1",
    "%s {0} {name} $name ${x} $$",
    "--help",
    "-",
    "*[a-z]?",
    "NULL",
    "größe 数 🛢",
    "<script>alert(1)</script>&amp;",
    "x" * 200,
]
TERMINAL_WOULD_OBEY = ("\x1b", "\r", "\x07", "\x08", "\u202e", "\u202c", "\u200b", "\u2028", "\x9b")
PROGRAM = [sys.executable, "-c", "from driftbook.store.cli import main; main()"]
DAYS = [date(2024, 1, 1) + timedelta(days=day) for day in range(12)]


def toml(value):
    return json.dumps(value, ensure_ascii=False)


def plan_of(names):
    tables = [f"[[series]]\nname = {toml(name)}\nunit = {toml(name)}\n" for name in names]
    return 'name = "desk"\n' + "".join(tables) + (
        f'[[estimate]]\nseries = {toml(names)}\nmodels = ["abm"]\nlookbacks = [8]\n'
    )  # fmt: skip


def delivery(names):
    text = io.StringIO()
    rows = [(name, day, 10 + at + (day.day * 7 % 5)) for at, name in enumerate(names) for day in DAYS]
    csv.writer(text).writerows([("series", "time", "value"), *rows])
    return text.getvalue()


@pytest.fixture(scope="module")
def folder(tmp_path_factory):
    """A book whose own name is odd, an inbox with odd files in it, and one run over series of all names."""
    folder = tmp_path_factory.mktemp("names")
    (folder / "inbox").mkdir()
    (folder / "inbox" / "=a'b;\x1b[31m.csv").write_text(delivery(NAMES), encoding="utf-8")
    (folder / "plan.toml").write_text(plan_of(NAMES), encoding="utf-8")
    create(folder / BOOK)
    with store.writing(folder / BOOK) as work:
        done = work.refresh(folder / "plan.toml", inbox=folder / "inbox")
    assert done.delivered.rows_refused == 0
    assert done.windows_fitted == 4 * len(NAMES)
    return folder


BOOK = 'o\'brien; "desk" \u202e.duckdb'


@pytest.fixture
def book(folder):
    return folder / BOOK


@pytest.fixture
def say(capsys):
    def said(*words):
        code = run([str(word) for word in words])
        out, err = capsys.readouterr()
        assert "should not have happened" not in err
        return code, out, err

    return said


def test_every_name_is_a_series_with_its_observations_and_estimates(book):
    with store.connect(book) as con:
        assert con.sql("select series from series").fetchall() == [(name,) for name in NAMES]
        for name in NAMES:
            found = con.execute("select count(*), min(value) from observation where series = ?", [name]).fetchall()
            assert found == [(12, 10.0 + NAMES.index(name))]
            quoted = name.replace("'", "''")
            sql = f"select count(*) from window_fit('{quoted}', 'abm') where value is not null"
            assert con.sql(sql).fetchall()[0][0] > 0
    assert store.verify(book).findings == []


def test_latest_takes_and_shows_every_name(book, say):
    code, out, _ = say("latest", book, "--", *NAMES)
    assert code == 0
    assert [name for name in NAMES if harmless(name) not in out] == []
    found = json.loads(say("latest", book, "--json", "--", *reversed(NAMES))[1])["rows"]
    assert {row["series"] for row in found} == set(NAMES)


@pytest.mark.parametrize("name", NAMES)
def test_explain_takes_and_shows_every_name(book, say, name):
    code, out, _ = say("explain", book, "--model", "abm", "--", name)
    assert (code, out.split(", abm, ")[0]) == (0, harmless(name))


def test_every_name_goes_through_csv_and_json_letter_by_letter(book, say):
    sql = "select series from series"
    rows = csv.reader(io.StringIO(say("sql", book, sql, "--format", "csv")[1], newline=""))
    assert [row[0] for row in rows] == ["series", *NAMES]
    assert [row["series"] for row in json.loads(say("sql", book, sql, "--format", "json")[1])] == NAMES


@pytest.mark.parametrize("name", [NAMES[0], NAMES[5], NAMES[9]])
def test_a_name_can_be_forgotten(book, say, tmp_path, name):
    copy = tmp_path / "copy.duckdb"
    copy.write_bytes(book.read_bytes())
    rest = [one for one in NAMES if one != name]
    (tmp_path / "plan.toml").write_text(plan_of(rest), encoding="utf-8")
    assert say("refresh", copy, "--plan", tmp_path / "plan.toml", "--quiet")[0] == 0
    assert say("forget", copy, "--yes", "--", name)[0] == 0
    with duckdb.connect(copy, read_only=True) as con:
        assert con.execute("select series from series order by all").fetchall() == [(one,) for one in sorted(rest)]
    assert store.verify(copy).findings == []


def test_only_the_files_that_were_meant_are_there(folder):
    assert sorted(path.name for path in folder.iterdir()) == sorted(["inbox", "plan.toml", BOOK, f"{BOOK}.lock"])
    assert len(list((folder / "inbox").iterdir())) == 1


# names that cannot be series, and what else a file can bring to the terminal


EVIL = "evil\x1b[2J\x1b]0;title\x07\x9b31m\r\u202e\u200bname"


@pytest.mark.parametrize(
    ("name", "reason"),
    [(EVIL, "bad_name"), ("n" * 10_000, "name_too_long"), ("tab\there", "bad_name"), ("n\0l", "bad_name")],
)
def test_a_name_with_control_characters_or_of_10_kb_is_a_refused_row_and_kept(say, tmp_path, name, reason):
    path = tmp_path / "desk.duckdb"
    create(path)
    row = f'"{name}",2024-01-01,1'
    (tmp_path / "a.csv").write_text(f"series,time,value\n{row}\n", encoding="utf-8", newline="")
    code, out, err = say("ingest", path, tmp_path / "a.csv", "--add-series")
    assert (code, err) == (0, "")
    assert ": 1 row read, 0 new, 0 revised, 0 same, 1 refused." in out
    assert f'{reason}: "{harmless(name)[:300]}' in out
    assert len(out) < 1000
    assert not set(TERMINAL_WOULD_OBEY) & set(out)
    with duckdb.connect(path, read_only=True) as con:
        assert con.execute("select text, reason from refused_row").fetchall() == [(row, reason)]


@pytest.mark.parametrize("name", ["tab\there", "n" * 10_000, "esc\x1b[2J"])
def test_the_plan_refuses_such_a_name(say, book, tmp_path, name):
    (tmp_path / "plan.toml").write_text(plan_of([name]), encoding="utf-8")
    code, out, err = say("refresh", book, "--plan", tmp_path / "plan.toml")
    assert (code, out) == (2, "")
    assert "series[1].name: " in err
    assert "cannot be a name: " in err or "…" in err
    assert len(err) < 5000
    assert not set(TERMINAL_WOULD_OBEY) & set(err)


def evil_files(folder):
    """Files that bring their text into sentences: names, headers, values, keys, and their own names."""
    head, row = "series,time,value\n", f"{EVIL},{EVIL},{EVIL}\n"
    return {
        "rows.csv": head + row,
        "header.csv": f"{EVIL},b,c\n1,2,3\n",
        "twice.csv": f"time,{EVIL},{EVIL}\n",
        "data first.csv": f"gas,2024-01-01,{EVIL}\n",
        "quote.csv": f'"{EVIL}\n',
        "object.json": json.dumps({EVIL: EVIL, "time": EVIL}) + "\n",
        f"{EVIL}.csv": head + row,
        f"{EVIL}.gz": "\x1f\x8b broken",
        f"{EVIL}.parquet": "PAR1 broken",
        f"{EVIL}.arrow": "ARROW1 broken",
    }


def test_nothing_that_a_terminal_would_obey_comes_out_of_any_command(say, book, tmp_path):
    inbox = tmp_path / EVIL
    inbox.mkdir()
    for name, text in evil_files(tmp_path).items():
        (inbox / name).write_bytes(text.encode("latin-1") if "\x1f" in text else text.encode())
    copy = tmp_path / "copy.duckdb"
    copy.write_bytes(book.read_bytes())
    evil_plan = tmp_path / f"{EVIL}.toml"
    evil_plan.write_text(f"name = {toml(EVIL)}\n[[{toml(EVIL)}]]\n", encoding="utf-8")
    commands = [
        *(["ingest", copy, file, *more, "--dry-run"] for file in inbox.iterdir() for more in ([], ["--wide"])),
        ["ingest", copy, inbox / "rows.csv", "--series", EVIL, "--add-series"],
        *(["ingest", copy, inbox / "rows.csv", option, EVIL]
          for option in ("--zone", "--dates", "--decimal", "--blank")),
        ["ingest", copy, inbox / "rows.csv", "--columns", f"time={EVIL}"],
        ["ingest", copy, inbox / "rows.csv", "--columns", EVIL],
        ["ingest", copy, inbox / "rows.csv", "--at", EVIL],
        ["ingest", copy, inbox / "rows.csv", f"--{EVIL}"],
        ["refresh", copy, "--inbox", inbox],
        ["refresh", copy, "--inbox", inbox / "none"],
        ["refresh", copy, "--plan", evil_plan],
        ["refresh", copy, "--plan", inbox / "none.toml"],
        ["latest", copy],
        ["latest", copy, "--full"],
        ["latest", copy, EVIL],
        ["latest", copy, "--as-of", EVIL],
        ["latest", inbox / "none.duckdb"],
        ["explain", copy, EVIL],
        ["explain", copy, NAMES[5], "--model", EVIL],
        ["explain", copy, NAMES[5], "--from", EVIL],
        ["sql", copy, "from refused_row"],
        ["sql", copy, "select series from series"],
        ["sql", copy, f"select '{EVIL}' as \"{EVIL}\""],
        ["sql", copy, f"select {EVIL}"],
        ["sql", copy, f"select error('{EVIL}')"],
        ["sql", copy, f"from \"{EVIL}\""],
        ["sql", copy, "select series from series", "--format", "json"],
        ["sql", copy, "select series from series", "--format", EVIL],
        ["sql", copy, "select 1", "--format", "csv", "--output", inbox / "out.csv"],
        ["verify", copy],
        ["verify", inbox / "none"],
        ["reproduce", copy],
        ["forget", copy, EVIL, "--yes"],
        ["forget", copy, NAMES[5]],
        ["new", inbox / "new.duckdb"],
        ["new", inbox / "no" / "new.duckdb"],
        [EVIL],
    ]  # fmt: skip
    for command in commands:
        _, out, err = say(*command)
        assert not set(TERMINAL_WOULD_OBEY) & set(out + err), command
        assert out + err, command


def test_csv_on_a_terminal_is_made_harmless_too(book):
    controller, terminal = pty.openpty()
    sql = f"select series, '{EVIL}' as text from series"
    done = subprocess.Popen([*PROGRAM, "sql", book, sql, "--format", "csv"], stdout=terminal, stderr=terminal)
    os.close(terminal)
    shown = b""
    while True:
        try:
            shown += os.read(controller, 1 << 16)
        except OSError:  # the other end is closed
            break
    os.close(controller)
    assert done.wait(60) == 0
    lines = shown.decode().split("\r\n")  # the terminal itself adds the carriage returns
    assert lines[0] == "series,text"
    assert len(lines) == len(NAMES) + 2
    assert not set(TERMINAL_WOULD_OBEY) & set("".join(lines))
    assert "evil\\x1b[2J" in lines[1]
