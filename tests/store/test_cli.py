"""The program: what each command prints, its exit codes, and that no wrong request ends in a traceback."""

import csv
import io
import json
import os
import shutil
import signal
import subprocess
import sys
import time
from datetime import UTC, datetime, timedelta
from pathlib import Path

import duckdb
import numpy as np
import polars as pl
import pytest
from made_series import days

from driftbook import store
from driftbook.store.cli.app import run
from driftbook.store.plan import parse_plan

ADDING = store.Options(add_series=True)
PROGRAM = [sys.executable, "-c", "from driftbook.store.cli import main; main()"]
PLAN = """
name = "desk"
[[series]]
name = "pellets_fob"
sign = "positive"
unit = "EUR/t"
[[series]]
name = "power_da"
unit = "EUR/MWh"
[[series]]
name = "crown_peg"
sign = "positive"
[[series]]
name = "reservoir_level"
sign = "positive"
unit = "%"
[[estimate]]
series = ["*"]
models = ["abm", "gbm", "ou", "exp_ou"]
lookbacks = [30]
"""


def pulled(count, level, size, seed):
    x, path = 0.0, []
    for draw in np.random.default_rng(seed).standard_normal(count):
        x = 0.8 * x + draw
        path.append(level + size * x)
    return path


@pytest.fixture(scope="module")
def _planned(tmp_path_factory):
    """Two runs: a first lot, then a correction."""
    path = tmp_path_factory.mktemp("cli") / "desk.duckdb"
    store.create(path)
    lots = [
        days("pellets_fob", pulled(80, 230.0, 4.0, 1)), days("power_da", pulled(80, 10.0, 9.0, 2)),
        days("crown_peg", [7.46] * 80), days("reservoir_level", pulled(80, 61.5, 1.0, 3)),
    ]  # fmt: skip
    with store.writing(path, at="2026-01-05T08:00") as work:
        work.ingest(pl.concat(lots), ADDING, name="first")
        work.refresh(parse_plan(PLAN, "the plan"))
    with store.writing(path, at="2026-01-06T08:00") as work:
        work.ingest(days("pellets_fob", [236.0], 70), name="second")
        work.refresh()
    return path


@pytest.fixture
def book(_planned, tmp_path):
    path = tmp_path / "desk.duckdb"
    shutil.copyfile(_planned, path)
    return path


@pytest.fixture
def say(capsys):
    """Runs a command; gives exit code, standard output, standard error."""

    def said(*words):
        code = run([str(word) for word in words])
        out, err = capsys.readouterr()
        assert "Traceback" not in out + err
        assert "should not have happened" not in out + err
        return code, out, err

    return said


def program(*words, **how):
    return subprocess.run([*PROGRAM, *map(str, words)], capture_output=True, text=True, timeout=60, check=False, **how)


# latest


def test_latest_is_a_sentence_and_a_table_that_fits_80_columns(book, say):
    code, out, err = say("latest", book, "--as-of", "2026-01-06")
    sentence, blank, head, *rows = out.splitlines()
    assert (code, err, blank) == (0, "", "")
    assert sentence == "Run 2 of 2026-01-06 08:00Z: 4 series, 4 late, 4 to look at."
    assert head.split() == ["series", "value", "volatility", "half-life"]
    assert [row.split()[0] for row in rows[::2]] == ["pellets_fob", "power_da", "crown_peg", "reservoir_level"]
    assert rows[1::2] == [
        "  exp_ou; correction; stale 657 d",
        "  abm; stale 657 d",
        "  –; no variation; stale 657 d",
        "  ou; stale 657 d",
    ]
    assert [line for line in out.splitlines() if len(line) > 80] == []


def test_on_a_wide_terminal_notes_stand_beside_their_rows(book, say, monkeypatch):
    monkeypatch.setenv("COLUMNS", "120")
    head, *rows = say("latest", book, "--as-of", "2026-01-06")[1].splitlines()[2:]
    assert head.split() == ["series", "value", "volatility", "half-life", "model", "note"]
    assert [row.split()[0] for row in rows] == ["pellets_fob", "power_da", "crown_peg", "reservoir_level"]
    assert rows[0].endswith("  correction; stale 657 d")


def test_latest_of_named_series_shows_only_these(book, say):
    code, out, _ = say("latest", book, "power_da", "crown_peg")
    assert code == 0
    assert [row.split()[0] for row in out.splitlines()[3:] if row[0] != " "] == ["power_da", "crown_peg"]


def test_latest_full_shows_every_column(book, say):
    code, out, _ = say("latest", book, "pellets_fob", "--full")
    with duckdb.connect(book, read_only=True) as con:
        names = [row[0] for row in con.execute("describe latest").fetchall()]
    shown = [line.split()[0] for line in out.splitlines()[1:] if line.strip()]
    assert (code, shown) == (0, names)


def test_latest_as_json_has_the_columns_of_the_view(book, say):
    _, out, err = say("latest", book, "--json", "--as-of", "2026-01-05")
    answer = json.loads(out)
    assert (answer["run_id"], len(answer["rows"]), err) == (1, 4, "")
    with duckdb.connect(book, read_only=True) as con:
        told = con.execute("select value, half_life_days from latest_at_run(1) where series = 'power_da'").fetchone()
    (row,) = [row for row in answer["rows"] if row["series"] == "power_da"]
    assert (row["value"], row["half_life_days"]) == told


def test_latest_of_an_empty_book_says_what_to_do(book, say, tmp_path):
    store.create(tmp_path / "empty.duckdb")
    assert say("latest", tmp_path / "empty.duckdb") == (0, "No run yet: take in files, then refresh with a plan.\n", "")


# explain, reproduce, verify, new


def test_explain_shows_both_statements_and_the_correction(book, say):
    code, out, _ = say("explain", book, "pellets_fob", "--model", "gbm", "--from", "run:1", "--to", "run:2")
    lines = out.splitlines()
    assert code == 0
    assert lines[0] == "pellets_fob, gbm, 30 steps: run 1 and run 2."
    assert lines[-1].startswith("2024-03-11 corrected from 2")
    assert lines[-1].endswith(" to 236 in run 2.")
    answer = json.loads(say("explain", book, "pellets_fob", "--json")[1])
    assert [one["after"] for one in answer["corrections"]] == [236.0]


def test_reproduce_says_identical_and_4_when_not(book, say):
    code, out, _ = say("reproduce", book, "--run", 1)
    assert (code, out) == (
        0,
        "Run 1: 700 rows computed again, 700 identical to the bit, 0 within rounding, 0 different.\n",
    )
    code, out, _ = say("reproduce", book, "--all", "--json")
    assert [one["different"] for one in json.loads(out)["runs"]] == [0, 0]
    with duckdb.connect(book) as con:
        con.execute(
            "update base.gbm set mu = mu + 1 where run_from = 1 and series_id = 1 and window_end::date = '2024-02-10'"
        )
    code, out, _ = say("reproduce", book, "--run", 1)
    first, second = out.splitlines()
    assert (code, first.endswith("1 different.")) == (4, True)
    assert second.startswith("  pellets_fob, gbm 30, 2024-02-10 00:00:00: mu ")


def test_reproduce_of_a_run_that_estimated_nothing_says_so(book, say):
    with store.writing(book) as work:
        work.ingest(days("power_da", [5.0], 80), name="third")
    assert say("reproduce", book) == (0, "Run 3 wrote no estimates.\n", "")


def test_verify_says_whole_and_4_when_not(book, say):
    code, out, _ = say("verify", book)
    assert (code, out.splitlines()[-1]) == (0, "The book is whole.")
    with duckdb.connect(book) as con:
        con.execute(
            "update base.observation set value = 1 where series_id = 1 and observed_at = timestamp '2024-01-05'"
        )
    code, out, _ = say("verify", book, "--quiet")
    assert code == 4
    assert "pellets_fob" in out
    code, out, _ = say("verify", book, "--json")
    assert (code, len(json.loads(out)["findings"])) == (4, 1)


def test_new_makes_a_book_once(tmp_path, say):
    path = tmp_path / "desk.duckdb"
    assert say("new", path, "--quiet") == (0, "", "")
    assert store.verify(path).findings == []
    code, out, err = say("new", path)
    assert (code, out, err) == (
        2,
        "",
        f"driftbook: {path} exists already; choose another name or remove it yourself.\n",
    )


# refresh


@pytest.fixture
def desk(book, tmp_path):
    """A book with its plan as a file, and an inbox with one day."""
    (tmp_path / "plan.toml").write_text(PLAN)
    inbox = tmp_path / "in"
    inbox.mkdir()
    (inbox / "day.csv").write_text("series,time,value\npellets_fob,2024-03-21,233\npower_da,2024-03-21,x\n")
    return book, tmp_path / "plan.toml", inbox


def test_refresh_takes_in_estimates_and_sums_up(desk, say):
    book, plan, inbox = desk
    code, out, _ = say("refresh", book, "--plan", plan, "--inbox", inbox)
    lines = out.splitlines()
    assert code == 0
    assert lines[0] == "day.csv: 2 rows read, 1 new, 0 revised, 0 same, 1 refused."
    assert lines[-1].startswith("Run 3: 4 windows computed, ")


def test_refresh_is_strict_about_refused_rows_when_told(desk, say):
    book, _, inbox = desk
    assert say("refresh", book, "--inbox", inbox, "--strict")[0] == 3


def test_refresh_with_nothing_new_says_so_and_writes_nothing(book, say):
    before = book.read_bytes()
    assert say("refresh", book) == (0, "Nothing new; nothing was written.\n", "")
    assert book.read_bytes() == before


def test_refresh_as_json_is_one_object_on_standard_output(desk, say):
    book, _, inbox = desk
    code, out, _ = say("refresh", book, "--inbox", inbox, "--json")
    answer = json.loads(out)
    assert (code, answer["run"], answer["windows_due"], answer["rows_refused"]) == (0, 3, 4, 1)
    assert answer["files_taken"] == ["day.csv"]


def test_a_dry_run_says_what_is_due_and_changes_nothing(desk, say):
    book, plan, inbox = desk
    before = book.read_bytes()
    plan.write_text(PLAN.replace("[30]", "[40]"))
    code, out, _ = say("refresh", book, "--plan", plan, "--inbox", inbox, "--dry-run")
    assert (code, book.read_bytes()) == (0, before)
    assert out.splitlines()[-1] == "Due: 564 windows, 700 rows to close; nothing was changed."


def test_quiet_says_nothing(desk, say):
    book, plan, inbox = desk
    refresh = ["refresh", book, "--plan", plan, "--inbox", inbox]
    for command in (["latest", book], refresh, ["explain", book, "power_da"], ["reproduce", book], ["verify", book]):
        assert say(*command, "--quiet") == (0, "", "")


# sql


SQL = "select series, count(*) as n from observation group by all order by all limit 2"


def test_sql_writes_a_table_csv_json_or_parquet(book, say, tmp_path):
    rows = [("crown_peg", 80), ("pellets_fob", 80)]
    assert say("sql", book, SQL) == (0, "series        n\ncrown_peg    80\npellets_fob  80\n", "")
    assert say("sql", book, SQL, "--format", "csv")[1] == "series,n\ncrown_peg,80\npellets_fob,80\n"
    assert json.loads(say("sql", book, SQL, "--format", "json")[1]) == [
        dict(zip(("series", "n"), row, strict=True)) for row in rows
    ]
    assert json.loads(say("sql", book, SQL, "--json")[1]) == {
        "columns": ["series", "n"],
        "rows": [list(row) for row in rows],
    }
    for how in ("table", "csv", "json", "parquet"):
        target = tmp_path / f"rows.{how}"
        assert say("sql", book, SQL, "--format", how, "--output", target) == (0, f"written to {target}\n", "")
        if how == "parquet":
            assert pl.read_parquet(target).rows() == rows
        else:
            assert target.read_text() == say("sql", book, SQL, "--format", how)[1]


def test_sql_reads_standard_input(book):
    done = program("sql", book, "-", "--format", "csv", input="select 6 * 7 as answer")
    assert (done.returncode, done.stdout, done.stderr) == (0, "answer\n42\n", "")


def test_every_value_survives_csv_and_json(book, say):
    sql = ("select 'a,\"b\"\nc' as a, null as b, 'nan'::double as c, 1.5 as d, [1, null] as e, "
           "{'x': date '2024-01-02'} as f, "
           "timestamptz '2024-01-02 03:04:05Z' as g, true as h, 2 as a")  # fmt: skip
    head, row = csv.reader(io.StringIO(say("sql", book, sql, "--format", "csv")[1]))
    assert len(head) == len(row) == 9
    assert (row[0], row[1], row[3], row[-1]) == ('a,"b"\nc', "", "1.5", "2")
    answer = json.loads(say("sql", book, sql, "--json")[1])
    assert len(answer["columns"]) == len(answer["rows"][0]) == 9
    assert answer["rows"][0] == [
        'a,"b"\nc', None, None, 1.5, [1, None], {"x": "2024-01-02"}, "2024-01-02T03:04:05+00:00", True, 2]  # fmt: skip


@pytest.mark.parametrize(("sql", "told"), [
    ("select 1; select 2", "give exactly one statement; there are 2."),
    ("", "give exactly one statement; there are 0."),
    ("delete from base.observation", "only a SELECT is run here"),
    ("create table t as select 1", "only a SELECT is run here"),
    ("copy (select 1) to 'elsewhere.csv'", "only a SELECT is run here"),
    ("set threads = 1", "only a SELECT is run here"),
    ("attach 'elsewhere.duckdb'", "only a SELECT is run here"),
    ("explain analyze delete from book.base.observation", "the query failed: "),
    ("from read_csv('/etc/passwd')", "the query failed: "),
    ("from '/etc/passwd'", "the query failed: "),
    ("from glob('/etc/*')", "the query failed: "),
    ("from read_csv('https://example.org/x.csv')", "the query failed: "),
    ("select * from latst", "latest"),
    ("selec 1", "the query failed: "),
    ("select 1 / 'a'", "the query failed: "),
    ("from window_fit('pellets_fob', 'uo')", "no model is called 'uo'"),
])  # fmt: skip
def test_sql_refuses_what_is_no_single_harmless_select(book, say, sql, told):
    before = book.read_bytes()
    code, out, err = say("sql", book, sql)
    assert (code, out) == (2, "")
    assert told in err
    assert book.read_bytes() == before


def test_a_query_that_fails_leaves_the_output_file_as_it_was(book, say, tmp_path):
    target = tmp_path / "rows.csv"
    target.write_text("precious")
    code, _, _ = say("sql", book, "select error('no') from observation", "--format", "csv", "--output", target)
    assert (code, target.read_text()) == (2, "precious")


@pytest.mark.parametrize("how", ["csv", "parquet"])
def test_an_output_that_cannot_be_written_is_said_in_a_sentence(book, say, tmp_path, how):
    target = tmp_path / "no" / "rows"
    code, _, err = say("sql", book, SQL, "--format", how, "--output", target)
    assert (code, err) == (2, f"driftbook: cannot write {target}: No such file or directory.\n")


ODD_TEXTS = [
    "=1+1",
    "+1",
    "-1",
    "@a",
    "\tx",
    "\rx",
    "\n=x",
    "  =1+1",
    "＝1",
    "a;=1+1",
    "plain",
    "'quoted",
    'say "x"',
    "",
]


def spoken(texts, extra=""):
    return "select unnest([" + ", ".join("'" + one.replace("'", "''") + "'" for one in texts) + f']) as "=head"{extra}'


def test_csv_guards_against_formulas_when_asked_and_else_tells_every_letter(book, say):
    sql = spoken(ODD_TEXTS, ", -1.5 as n, -2 as i, null as nothing, date '2024-01-02' as d")
    plain = list(csv.reader(io.StringIO(say("sql", book, sql, "--format", "csv")[1], newline="")))
    assert [row[0] for row in plain] == ["=head", *ODD_TEXTS]
    text = say("sql", book, sql, "--format", "csv", "--guard-formulas")[1]
    guarded = list(csv.reader(io.StringIO(text, newline="")))
    assert [row[0] for row in guarded] == ["'=head", *(f"'{one}" for one in ODD_TEXTS[:9]), *ODD_TEXTS[9:]]
    assert {tuple(row[1:]) for row in guarded[1:]} == {("-1.5", "-2", "", "2024-01-02")}
    assert '"a;=1+1",-1.5,-2,"","2024-01-02"\n' in text, "a delimiter that only the spreadsheet knows opens no new cell"


@pytest.mark.parametrize("how", ["table", "json", "parquet"])
def test_the_guard_is_for_csv_alone(book, say, tmp_path, how):
    words = ["sql", book, SQL, "--format", how, "--guard-formulas", "--output", tmp_path / "rows"]
    assert say(*words) == (2, "", "driftbook: --guard-formulas is for --format csv.\n")


def test_an_answer_cannot_be_written_over_the_book(book, say, tmp_path):
    before = book.read_bytes()
    (tmp_path / "link").symlink_to(book)
    for target in (book, tmp_path / "link"):
        assert say("sql", book, SQL, "--output", target)[::2] == (
            2,
            f"driftbook: {target} is the book itself; name another file.\n",
        )
    assert book.read_bytes() == before


def test_json_goes_to_standard_output_alone(book, say, tmp_path):
    code, _, err = say("sql", book, SQL, "--json", "--output", tmp_path / "rows")
    assert (code, err) == (2, "driftbook: --json writes to standard output; write a file with --format json.\n")


@pytest.mark.parametrize(
    "words", [("sql", "{book}", "select '\udcff'"), ("new", "\udcff.duckdb"), ("latest", "{book}", "\udcff")]
)
def test_an_argument_that_is_no_text_is_told_in_a_sentence(book, say, words):
    code, out, err = say(*(word.replace("{book}", str(book)) for word in words))
    assert (code, out) == (2, "")
    assert err.endswith("is no UTF-8 text; rename or write it in UTF-8.\n")


def test_standard_input_that_is_no_text_is_told_in_a_sentence(book):
    done = subprocess.run(
        [*PROGRAM, "sql", book, "-"], input=b"select '\xff'", capture_output=True, timeout=60, check=False
    )
    assert (done.returncode, done.stderr) == (2, b"driftbook: standard input is no UTF-8 text.\n")


def test_parquet_needs_a_file(book, say):
    assert say("sql", book, SQL, "--format", "parquet")[::2] == (
        2,
        "driftbook: Parquet needs a file: add --output FILE.\n",
    )


def test_a_reader_that_has_read_enough_ends_the_program_quietly(book):
    asked = f"{' '.join(map(repr, PROGRAM))} sql {book} 'select repeat($$x$$, 1000) from range(2000)' | head -c 10"
    done = subprocess.run(
        ["bash", "-o", "pipefail", "-c", asked], capture_output=True, text=True, timeout=60, check=False
    )
    assert (done.returncode, done.stderr) == (0, "")


# wrong requests, in the process


@pytest.mark.parametrize(("words", "code", "told"), [
    (["latest", "{book}", "pellet_fob"], 2, "the book says nothing of 'pellet_fob'; did you mean 'pellets_fob'?\n"),
    (["explain", "{book}", "pellet_fob"], 2, "the book has no series 'pellet_fob'; did you mean 'pellets_fob'?\n"),
    (["explain", "{book}", "pellets_fob", "--model", "exp_uo"], 2,
     "no model is called 'exp_uo'; did you mean 'exp_ou'?\n"),
    (["latest", "{book}", "--as-of", "tomorrow"], 2, "'tomorrow' is no moment; write 2026-01-31, "),
    (["refresh", "{book}", "--at", "2025-01-01"], 2, "is not later than the last run's"),
    (["refresh", "{book}", "--at", "2999-01-01"], 2, "lies in the future"),
    (["refresh", "{book}", "--plan", "{folder}/none.toml"], 2, "cannot read the plan"),
    (["refresh", "{book}", "--inbox", "{folder}/none"], 2, "there is no folder"),
    (["refresh", "{book}", "--wrokers", "2"], 2, "--workers"),
    (["refesh", "{book}"], 2, "refresh"),
    (["sql", "{book}"], 2, "SQL"),
    (["sql", "{book}", "select 1", "--format", "xml"], 2, "'xml' is not one of"),
    (["reproduce", "{book}", "--run", "99"], 2, "has no run 99; its runs are 1 to 2."),
    (["reproduce", "{book}", "--run", "x"], 2, "Invalid value for '--run'"),
    *((
        [command, "{folder}/none.duckdb", *more], 2, "none.duckdb"
    ) for command, more in (("latest", []), ("refresh", []), ("explain", ["a"]), ("sql", ["select 1"]), ("verify", []),
                            ("reproduce", []), ("ingest", ["x.csv"]))),
    *((
        [command, "{folder}", *more], 2, "is a folder, not a book."
    ) for command, more in (("latest", []), ("refresh", []), ("explain", ["a"]), ("sql", ["select 1"]), ("verify", []),
                            ("reproduce", []), ("ingest", ["x.csv"]))),
    *((
        [command, "{folder}/text.duckdb", *more], 1, "text.duckdb"
    ) for command, more in (("latest", []), ("explain", ["a"]), ("sql", ["select 1"]), ("verify", []),
                            ("reproduce", []))),
    *((
        [command, "{folder}/plain.duckdb", *more], 1, "plain.duckdb"
    ) for command, more in (("latest", []), ("refresh", []), ("explain", ["a"]), ("sql", ["select 1"]), ("verify", []),
                            ("reproduce", []))),
])  # fmt: skip
def test_a_wrong_request_ends_in_a_sentence_and_its_code(book, say, tmp_path, words, code, told):
    (tmp_path / "text.duckdb").write_text("this is no book\n" * 1000)
    with duckdb.connect(tmp_path / "plain.duckdb") as con:
        con.execute("create table t as select 1 as a")
    words = [word.replace("{book}", str(book)).replace("{folder}", str(tmp_path)) for word in words]
    found, out, err = say(*words)
    assert (found, out) == (code, "")
    assert told in err
    assert err.startswith("driftbook: ")


def test_an_error_as_json_is_one_object(book, say):
    code, out, err = say("latest", book, "nobody", "--json")
    assert (code, json.loads(out)) == (2, {"error": "the book says nothing of 'nobody'."})
    assert err == "driftbook: the book says nothing of 'nobody'.\n"


def test_a_plan_with_mistakes_names_them_all(desk, say):
    book, plan, _ = desk
    plan.write_text(PLAN.replace('sign = "positive"', 'sgn = "positive"').replace('"exp_ou"', '"exp_uo"'))
    code, _, err = say("refresh", book, "--plan", plan)
    assert code == 2
    assert err.splitlines() == [
        f"driftbook: {plan} has 4 mistakes:",
        "  series[1].sgn: no such key; did you mean 'sign'?",
        "  series[3].sgn: no such key; did you mean 'sign'?",
        "  series[4].sgn: no such key; did you mean 'sign'?",
        "  estimate[1].models[4]: no model is called 'exp_uo'; did you mean 'exp_ou'?",
    ]


def test_what_a_terminal_would_obey_never_reaches_it(book, say):
    """A name with an escape, a carriage return and a change of direction, put there behind the program's back."""
    evil = "evil\x1b[2J\r\u202ename"
    with duckdb.connect(book) as con:
        con.execute("update base.series set series = ? where series_id = 2", [evil])
    commands = [
        ["latest", book],
        ["latest", book, "--full"],
        ["latest", book, "evil\x1b[2J"],
        ["explain", book, evil],
        ["explain", book, "\x1b[31m"],
        ["sql", book, "select series from series"],
        ["verify", book],
    ]
    for command in commands:
        _, out, err = say(*command)
        assert [character for character in out + err if character in "\x1b\r\u202e"] == []
    assert "evil\\x1b[2J\\r\\u202ename" in say("latest", book)[1]


# as processes


def test_help_of_every_command_has_an_example_and_the_caution_stands_below(say):
    code, out, _ = say("--help")
    assert code == 0
    assert "no advice and no forecast of returns" in " ".join(out.replace("│", " ").split())
    for command in ("refresh", "latest", "explain", "sql", "reproduce", "verify", "demo", "new", "ingest"):
        assert command in out
        code, text, _ = say(command, "--help")
        assert code == 0
        assert f"Example: driftbook {command}" in " ".join(text.split())


def test_help_and_sql_load_neither_polars_scipy_pandas_nor_the_plan(book):
    """Nor pydantic, but for what the command line's own library wants of it; sql not even DuckDB, but in its child."""
    script = ("import sys; from driftbook.store.cli.app import run; code = run(sys.argv[1:]); "
              "heavy = ('polars', 'scipy', 'pandas', 'duckdb', 'pyarrow', 'numpy', 'driftbook.store.plan'); "
              "print([name for name in heavy if name in sys.modules], file=sys.stderr)")  # fmt: skip
    for words in (["--help"], ["sql", str(book), "select 1"]):
        done = subprocess.run(
            [sys.executable, "-c", script, *words], capture_output=True, text=True, timeout=60, check=True
        )
        assert done.stderr.splitlines()[-1] == "[]"


def test_another_writer_is_named_and_the_exit_code_is_75(book):
    with store.writing(book):
        done = program("refresh", book)
        assert done.returncode == 75
        assert str(os.getpid()) in done.stderr
        assert program("latest", book).returncode == 0


def test_an_interrupt_in_a_refresh_leaves_the_book_and_gives_130(book):
    """Long windows on many observations, interrupted while they are computed."""
    count = 400_000
    plan = PLAN.replace("[[estimate]]", '[[series]]\nname = "tide"\nclock = "seconds"\n[[estimate]]')
    with store.writing(book) as work:
        times = [datetime(2020, 1, 1, tzinfo=UTC) + timedelta(minutes=minute) for minute in range(count)]
        values = 5 + np.sin(np.arange(count) * 0.7)
        work.ingest(pl.DataFrame({"series": ["tide"] * count, "time": times, "value": values}), ADDING, name="tide")
    book.with_name("plan.toml").write_text(plan)
    before = book.read_bytes()
    running = subprocess.Popen(
        [*PROGRAM, "refresh", str(book), "--plan", str(book.with_name("plan.toml"))],
        stdout=subprocess.PIPE, stderr=subprocess.PIPE, text=True)  # fmt: skip
    drafts = Path(book.parent)
    give_up = time.monotonic() + 30
    while not list(drafts.glob(".driftbook-draft-*")) and time.monotonic() < give_up:
        time.sleep(0.01)
    time.sleep(0.3)
    running.send_signal(signal.SIGINT)
    out, err = running.communicate(timeout=60)
    assert (running.returncode, out) == (130, ""), err
    assert err.splitlines()[-1] == "driftbook: interrupted; the book is unchanged."
    assert "Traceback" not in err
    assert book.read_bytes() == before
    assert list(drafts.glob(".driftbook-draft-*")) == []


def test_under_cron_progress_is_plain_lines_on_standard_error(desk):
    book, plan, inbox = desk
    done = program("refresh", book, "--plan", plan, "--inbox", inbox)
    assert (done.returncode, done.stderr) == (0, "4 of 4 windows\n")
    assert "\x1b" not in done.stdout + done.stderr
    assert "\r" not in done.stdout + done.stderr
