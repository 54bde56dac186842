"""Other programs at a book's file: one that writes to it keeps ours out, and the log that one left is not lost.

A write-ahead log beside a book holds changes that are committed and not yet in the file. It goes into the draft with
the book; for the swap it is set aside, since beside the new file it would make the book unopenable.
"""

from __future__ import annotations

import errno
import fcntl
import os
import struct
from collections.abc import Iterator
from contextlib import contextmanager
from pathlib import Path

from driftbook.store.errors import BookError, BookLocked

# struct flock of Linux: l_type, l_whence, l_start, l_len, l_pid.
_FLOCK = struct.Struct("hhqqi4x")


@contextmanager
def no_foreign_writer(book: Path) -> Iterator[None]:
    """Holds an open-file-description read lock, so that no DuckDB process can open the book for writing.

    A plain POSIX lock would be lost as soon as any descriptor of the file is closed in this process.
    """
    try:
        descriptor = os.open(book, os.O_RDONLY)
    except OSError as error:
        raise BookError(f"cannot read {book}: {error.strerror}.") from error
    try:
        fcntl.fcntl(descriptor, fcntl.F_OFD_SETLK, _FLOCK.pack(fcntl.F_RDLCK, os.SEEK_SET, 0, 0, 0))
    except OSError as error:
        if error.errno not in (errno.EAGAIN, errno.EACCES):
            raise
        holder = _writing_process(descriptor)
        os.close(descriptor)
        raise BookLocked(
            f"{book} is open for writing in {holder}, outside driftbook; close it there, then try again."
        ) from None
    try:
        yield
    finally:
        os.close(descriptor)


def _writing_process(descriptor: int) -> str:
    asked = _FLOCK.pack(fcntl.F_RDLCK, os.SEEK_SET, 0, 0, 0)
    pid = _FLOCK.unpack(fcntl.fcntl(descriptor, fcntl.F_GETLK, asked))[4]
    return f"process {pid}" if pid > 0 else "another process"


def wal(path: Path) -> Path:
    """Where DuckDB keeps the write-ahead log of a file."""
    return path.with_name(path.name + ".wal")


def set_wal_aside(book: Path, draft: Path) -> None:
    """Moves the log of the old file out of the new one's way, and notes which file is which."""
    if wal(book).exists():
        _note(book).write_text(f"{_identity(book)}\n{_identity(draft)}")
        sync(_note(book))
        wal(book).rename(_aside(book))


def drop_wal_set_aside(book: Path) -> None:
    """Removes a log set aside, once what it held is in the book."""
    _aside(book).unlink(missing_ok=True)
    _note(book).unlink(missing_ok=True)


def put_wal_back(book: Path) -> None:
    """Puts back a log that was set aside for a swap that did not happen; one whose swap did happen is removed."""
    if _aside(book).exists() and not _swap_happened(book):
        if wal(book).exists():
            raise BookError(
                f"{_aside(book).name} and {wal(book).name} beside {book} both hold changes of a foreign writer; "
                "look which belongs to the book and move the other away."
            )
        _aside(book).rename(wal(book))
    drop_wal_set_aside(book)


def _swap_happened(book: Path) -> bool:
    before, after = [*_note(book).read_text().splitlines(), "", ""][:2] if _note(book).exists() else ("", "")
    found = _identity(book)
    if found not in (before, after):
        raise BookError(
            f"{_aside(book).name} beside {book} holds changes that a foreign writer made to another file than is there "
            "now; move it away, or put that file back."
        )
    return found == after


def sync(path: Path) -> None:
    """Waits until a file, or a folder's list of names, is on the disk."""
    descriptor = os.open(path, os.O_RDONLY)
    try:
        os.fsync(descriptor)
    finally:
        os.close(descriptor)


def _identity(path: Path) -> str:
    stat = path.stat()
    return f"{stat.st_dev} {stat.st_ino} {stat.st_size} {stat.st_mtime_ns}"


def _aside(book: Path) -> Path:
    return book.with_name(f".driftbook-aside-{book.name}.wal")


def _note(book: Path) -> Path:
    return book.with_name(f".driftbook-aside-{book.name}.id")
