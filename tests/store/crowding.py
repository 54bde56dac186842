"""What children do at a book while others do the same."""

import json
import time
from pathlib import Path

import duckdb

from driftbook import store
from driftbook.store.errors import BookLocked
from driftbook.store.swap import rewriting


def read_and_connect_again(book, stop, driftbook):
    """Asks the same in several statements, over and over, each time with a new connection; prints what it saw."""
    seen, connections = {}, 0
    while not Path(stop).exists():
        with store.connect(book) if driftbook else duckdb.connect(book, read_only=True) as con:
            (run,) = con.execute("select max(run_id) from run").fetchone()
            rows = con.execute("select count(*), sum(value) from observation").fetchone()
            (versions,) = con.execute("select count(*) from versions.observation").fetchone()
            (newest,) = con.execute("select max(run_id) from observation").fetchone()
            answer = [*rows, versions, newest]
            assert seen.setdefault(run, answer) == answer, (run, seen[run], answer)
            connections += 1
        time.sleep(0.02)
    print(json.dumps([connections, seen]))


def write_once(book, name, wait, hold):
    with rewriting(Path(book), wait) as draft:
        time.sleep(hold)
        draft.con.execute("insert into base.plan (plan_sha256, name, text, run_from) values ('', ?, '', 1)", [name])
        draft.kept = True


def refused_or_done(book, name, wait, hold):
    try:
        write_once(book, name, wait, hold)
    except BookLocked as error:
        print(error)
        return error.exit_code
    return 0


def write_three_times(book, name):
    for n in range(3):
        write_once(book, f"{name}, {n}", 60, 0)
