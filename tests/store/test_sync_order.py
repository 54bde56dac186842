"""What is on the disk before what: the draft before its name, its name before the run is said to be done.

The system calls of a run, as the kernel saw them.
"""

import re
import shutil
import subprocess
import sys

import pytest
from killing import book_with_a_stray_log, small_book

PROGRAM = [sys.executable, "-c", "from driftbook.store.cli import main; main()"]
CALLS = (
    "open,openat,creat,fsync,fdatasync,rename,renameat,renameat2,link,linkat,unlink,unlinkat,"
    "write,pwrite64,writev,pwritev,ftruncate,truncate,copy_file_range,sendfile,chmod,fchmod,fchmodat,chown,fchownat"
)
CALL = re.compile(r"^(?:\d+ +)?(\w+)\((.*)\) += (-?\d+)")
RESUMED = re.compile(r"^(\d+) +<\.\.\. (\w+) resumed>(.*)$")
UNFINISHED = re.compile(r"^(\d+) +(.*) <unfinished \.\.\.>$")
WRITES = {"write", "pwrite64", "writev", "pwritev", "ftruncate", "truncate"}


def whole_lines(text):
    """Lines of calls, those joined again that another thread's came between."""
    begun = {}
    for line in text.splitlines():
        if match := UNFINISHED.match(line):
            begun[match[1]] = match[2]
        elif match := RESUMED.match(line):
            yield f"{match[1]} {begun.pop(match[1])}{match[3]}"
        else:
            yield line


def traced(folder, *words):
    """The calls of a run that succeeded, in the order in which they ended: name, and its files by their paths."""
    log = folder.parent / "trace"
    command = ["strace", "-f", "-y", "-s", "8", "-o", log, "-e", f"trace={CALLS}", *PROGRAM, *map(str, words)]
    subprocess.run(command, check=True, capture_output=True, timeout=300)
    found = []
    for line in whole_lines(log.read_text()):
        match = CALL.match(line)
        if match and int(match[3]) >= 0 and str(folder) in line:
            found.append((match[1], match[2]))
    return found


def places(calls, names, *parts):
    """Where calls of such a name about such files are."""
    return [k for k, (name, text) in enumerate(calls) if name in names and all(part in text for part in parts)]


@pytest.fixture(autouse=True)
def _needs_strace():
    if shutil.which("strace") is None:
        pytest.skip("there is no strace here")
    if subprocess.run(["strace", "-o", "/dev/null", "true"], capture_output=True, check=False).returncode:
        pytest.skip("processes cannot be traced here")


SYNCS = {"fsync", "fdatasync"}
RENAMES = {"rename", "renameat", "renameat2"}
RIGHTS = {"chmod", "fchmod", "fchmodat", "chown", "fchownat"}


def only(found):
    assert len(found) == 1
    return found[0]


def swap_in_order(calls, folder):
    """Checks a swap; gives the places of its rename and of the folder's sync."""
    book = f"{folder}/desk.duckdb"
    rename = only(places(calls, RENAMES, "/draft.duckdb", f'"{book}"'))
    changed = places(calls, WRITES | {"copy_file_range"}, "/draft.duckdb>") + places(calls, RIGHTS, "/draft.duckdb")
    assert {calls[k][0] for k in changed} & RIGHTS
    synced = [k for k in places(calls, SYNCS, "/draft.duckdb>") if max(changed) < k < rename]
    assert synced
    confirmed = [k for k in places(calls, SYNCS, f"<{folder}>") if k > rename]
    assert confirmed
    written = places(calls, WRITES, f"<{book}>")
    copied_into = [k for k in places(calls, {"copy_file_range"}) if f"<{book}>" in calls[k][1].split(",")[2]]
    opened = [k for k in places(calls, {"open", "openat"}, f'"{book}"') if re.search("O_WRONLY|O_RDWR", calls[k][1])]
    assert written + copied_into + opened == []
    return rename, confirmed[0]


def test_the_draft_is_on_the_disk_before_it_has_the_books_name_and_the_name_before_the_run_ends(tmp_path):
    folder = tmp_path / "desk"
    small_book(folder)
    calls = traced(folder, "ingest", folder / "desk.duckdb", folder / "delivery.csv", "--quiet")
    rename, confirmed = swap_in_order(calls, folder)
    noted = [k for k in places(calls, {"write"}, "desk.duckdb.lock>") if k > rename]
    assert noted
    assert confirmed < noted[0]


def test_a_log_is_set_aside_before_the_swap_and_removed_after_it_is_confirmed(tmp_path):
    folder = tmp_path / "desk"
    book_with_a_stray_log(folder)
    calls = traced(folder, "ingest", folder / "desk.duckdb", folder / "delivery.csv", "--quiet")
    rename, confirmed = swap_in_order(calls, folder)
    note_synced = only(places(calls, SYNCS, ".driftbook-aside-desk.duckdb.id>"))
    set_aside = only(places(calls, RENAMES, '/desk.duckdb.wal"', ".driftbook-aside-desk.duckdb.wal"))
    removed = only(places(calls, {"unlink", "unlinkat"}, ".driftbook-aside-desk.duckdb.wal"))
    assert note_synced < set_aside < rename < confirmed < removed


def test_a_new_book_is_on_the_disk_before_it_has_its_name(tmp_path):
    folder = tmp_path / "desk"
    folder.mkdir()
    calls = traced(folder, "new", folder / "desk.duckdb", "--quiet")
    link = only(places(calls, {"link", "linkat"}, "/draft.duckdb", f'"{folder}/desk.duckdb"'))
    last_write = max(places(calls, WRITES, "/draft.duckdb>"))
    assert [k for k in places(calls, SYNCS, "/draft.duckdb>") if last_write < k < link]
    assert [k for k in places(calls, SYNCS, f"<{folder}>") if k > link]
