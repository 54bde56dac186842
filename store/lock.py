"""The writer's lock: a sibling file that stays, says who holds it, and holds the time of the last look."""

from __future__ import annotations

import json
import os
import socket
from collections.abc import Iterator
from contextlib import contextmanager, suppress
from dataclasses import asdict, dataclass
from datetime import UTC, datetime
from pathlib import Path

import filelock

from driftbook.store.errors import BookError, BookLocked

_PRIVATE = 0o600


@dataclass(frozen=True)
class LastLook:
    """What the lock file tells: who writes or wrote last, since when, and when a writer last finished a look."""

    holder: str | None = None
    since: str | None = None
    looked_at: str | None = None
    found: str | None = None


def lock_path(book: Path) -> Path:
    """The lock file of a book; a link to a book has the book's."""
    book = book.resolve()
    return book.with_name(book.name + ".lock")


def last_look(book: Path) -> LastLook:
    """What the lock file says; empty where there is none or it cannot be read."""
    try:
        with lock_path(book).open(encoding="utf-8") as file:
            return LastLook(**json.loads(file.readline()))
    except (OSError, ValueError, TypeError):
        return LastLook()


@contextmanager
def writers_lock(book: Path, wait: float) -> Iterator[None]:
    """Holds the book's lock, waiting up to `wait` seconds for another writer.

    Raises BookLocked, naming the holder, when the wait was not enough.
    """
    lock = filelock.FileLock(lock_path(book), timeout=wait, mode=_mode_no_wider_than(book))
    try:
        lock.acquire()
    except filelock.Timeout:
        raise BookLocked(_held_by(book, wait)) from None
    except OSError as error:
        raise BookError(f"cannot write beside {book}: {error.strerror}; the folder must be writable.") from error
    try:
        _narrow(book)
        before = last_look(book)
        _write(book, LastLook(_this_process(), _now(), before.looked_at, before.found))
        yield
    finally:
        _forget_holder(book)
        lock.release()


def record_look(book: Path, found: str) -> None:
    """Notes, while the lock is held, that a writer looked now and what came of it."""
    look = last_look(book)
    _write(book, LastLook(look.holder, look.since, _now(), found))


def _held_by(book: Path, wait: float) -> str:
    look = last_look(book)
    holder = f"{look.holder} since {look.since}" if look.holder else "another process"
    waited = f"after waiting {wait:g} s; " if wait else ""
    return f"{book} is being written by {holder}; {waited}try again later or give a longer --wait."


def _forget_holder(book: Path) -> None:
    look = last_look(book)
    _write(book, LastLook(None, None, look.looked_at, look.found))


def _write(book: Path, look: LastLook) -> None:
    """Overwrites the note in one step and then cuts the rest off: who reads meanwhile, or after a crash, reads a note.

    It is a courtesy, and a disk that is too full for it is no reason to fail.
    """
    text = json.dumps({key: value for key, value in asdict(look).items() if value is not None}) + "\n"
    with suppress(OSError), lock_path(book).open("r+b", buffering=0) as file:
        file.truncate(file.write(text.encode()))


def _narrow(book: Path) -> None:
    """Takes rights from a lock file that the book has lost since the file was made."""
    path = lock_path(book)
    mode = path.stat().st_mode & 0o777
    if mode & ~_mode_no_wider_than(book):
        with suppress(PermissionError):  # it may belong to another writer of the same book
            path.chmod(mode & _mode_no_wider_than(book))


def _mode_no_wider_than(book: Path) -> int:
    try:
        return book.stat().st_mode & 0o666
    except OSError:
        return _PRIVATE


def _this_process() -> str:
    return f"process {os.getpid()} on {socket.gethostname()}"


def _now() -> str:
    return datetime.now(UTC).isoformat(timespec="seconds")
