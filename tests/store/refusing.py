"""What children do on a machine that refuses: without rights, room or handles, interrupted, or with a wrong clock."""

import ctypes
import os
import resource
import shutil
import signal
from datetime import UTC, datetime
from pathlib import Path

from driftbook.store import moments, runs
from driftbook.store.cli import app

_CAPABILITIES = 0x20080522


def run(*words):
    return app.run([str(word) for word in words])


def run_with_the_rights_of_the_owner(*words):
    """Even root then has only the rights that files and folders give to their owner."""
    header = (ctypes.c_uint32 * 2)(_CAPABILITIES, 0)
    assert ctypes.CDLL(None).capset(header, (ctypes.c_uint32 * 6)()) == 0
    return run(*words)


def run_in_the_belief_that_there_is_room(*words):
    usage = shutil.disk_usage
    shutil.disk_usage = lambda path: usage(path)._replace(free=1 << 40)
    return run(*words)


def run_with_handles(more, *words):
    """So many file handles more than are open already."""
    resource.setrlimit(resource.RLIMIT_NOFILE, (_open_handles() + more,) * 2)
    return run(*words)


def _open_handles():
    return len(list(Path("/proc/self/fd").iterdir())) - 1  # but for the one that looks


def run_interrupted_at(name, *words):
    """Ctrl-C comes just as a call to the system is made."""
    call = getattr(os, name)

    def interrupted(*arguments, **named):
        signal.raise_signal(signal.SIGINT)
        return call(*arguments, **named)

    setattr(os, name, interrupted)
    return run(*words)


class _EarlyClock(datetime):
    @classmethod
    def now(cls, tz=None):
        return datetime(2020, 1, 1, tzinfo=UTC).astimezone(tz)


def run_with_an_early_clock(*words):
    runs.datetime = moments.datetime = _EarlyClock
    return run(*words)
