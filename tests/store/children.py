"""Processes that start at once, since the program is loaded already in the server that forks them."""

import os
import sys
import traceback
from dataclasses import dataclass
from multiprocessing import forkserver, get_context
from pathlib import Path

# Starts every child; also makes the pipes that children are given.
FORKING = get_context("forkserver")
FORKING.set_forkserver_preload(
    [
        "driftbook.store.cli.app",
        "driftbook.store.forgetting",
        "driftbook.store.proof",
        "driftbook.store.swap",
        "driftbook.store.writer",
        "pandas",  # which pyarrow loads where it is there
        "loaded",
    ]
)


@dataclass(frozen=True)
class Ended:
    """How a child ended; the code is negative if a signal ended it."""

    code: int | None
    out: str
    err: str


class Child:
    """A child that runs a function and writes to files beside each other."""

    def __init__(self, folder: Path, function, *arguments):
        _see_that_the_server_runs()
        folder.mkdir(parents=True, exist_ok=True)
        self._said = [folder / "out", folder / "err"]
        for path in self._said:
            path.write_bytes(b"")
        self.process = FORKING.Process(target=_run, args=(self._said, function, arguments))
        self.process.start()

    def ended(self, timeout=120) -> Ended:
        self.process.join(timeout)
        if self.process.exitcode is None:
            self.process.kill()
            self.process.join()
        out, err = (path.read_text() for path in self._said)
        return Ended(self.process.exitcode, out, err)


def _see_that_the_server_runs():
    """What stands beside the tests is on its path, as it is on ours."""
    before = os.environ.get("PYTHONPATH")
    os.environ["PYTHONPATH"] = os.pathsep.join([str(Path(__file__).parent), *([before] if before else [])])
    forkserver.ensure_running()
    if before is None:
        del os.environ["PYTHONPATH"]
    else:
        os.environ["PYTHONPATH"] = before


def _run(said, function, arguments):
    for number, path in enumerate(said, start=1):
        os.dup2(os.open(path, os.O_WRONLY | os.O_APPEND), number)
    code = 70
    try:
        code = function(*arguments) or 0
    except BaseException:
        traceback.print_exc()
    finally:
        sys.stdout.flush()
        sys.stderr.flush()
        os._exit(code)
