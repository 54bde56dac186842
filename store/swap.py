"""Copy, work, swap: the one place where a book is opened for writing, and always a private copy of it."""

from __future__ import annotations

import errno
import fcntl
import os
import shutil
import struct
from collections.abc import Iterator
from contextlib import contextmanager, suppress
from pathlib import Path
from typing import BinaryIO

import duckdb

from driftbook.store import lock, migrate
from driftbook.store.errors import BookError, BookLocked, UsageError
from driftbook.store.sql import query

_CHUNK = 64 << 20
_ROOM_TO_WORK = 32 << 20
# Schemas of a book; a catalog of the same name would make every qualified name ambiguous.
_RESERVED_STEMS = {"base", "versions", "main", "temp", "system", "information_schema", "pg_catalog"}
# struct flock of Linux: l_type, l_whence, l_start, l_len, l_pid.
_FLOCK = struct.Struct("hhqqi4x")
_SETTINGS = (
    "set TimeZone = 'UTC'",
    # DuckDB 2.0.1 pushes a TRY_CAST into the CSV scan as a hard cast and then drops rows.
    "set disabled_optimizers = 'type_pushdown'",
)


class Draft:
    """A private copy of the book, open for writing.

    `kept` says that it shall take the book's place when the block ends, `rewritten` that its rows shall be written into
    a fresh file first, so that nothing of what was deleted is left, `outcome` what the lock file notes of it.
    """

    def __init__(self, con: duckdb.DuckDBPyConnection, migrated: bool) -> None:
        self.con = con
        self.migrated = migrated
        self.kept = False
        self.rewritten = False
        self.outcome: str | None = None


def create(book: Path) -> None:
    """Makes an empty book with all migrations applied and no run."""
    if {book.stem.casefold(), book.name.casefold()} & _RESERVED_STEMS:
        raise UsageError(f"a book cannot be called {book.stem}: it has a schema of that name; choose another name.")
    if book.exists():
        raise UsageError(f"{book} exists already; choose another name or remove it yourself.")
    if not book.parent.is_dir():
        raise UsageError(f"there is no folder {book.parent}; make it first.")
    with lock.writers_lock(book, 0):
        draft = _draft_path(book)
        try:
            with _opened(draft, {"storage_compatibility_version": "v1.2.0"}) as con:
                migrate.apply_pending(con)
                con.execute("checkpoint")
            _sync(draft)
            _link(draft, book)
            _sync(book.parent)
        finally:
            _remove_draft(draft)
        lock.record_look(book, "made the book")


def _link(draft: Path, book: Path) -> None:
    """Gives the draft the book's name; a link, unlike a rename, never replaces what came into being meanwhile."""
    try:
        os.link(draft, book)
    except FileExistsError:
        raise UsageError(f"{book} exists already; choose another name or remove it yourself.") from None


@contextmanager
def rewriting(book: Path, wait: float) -> Iterator[Draft]:
    """Gives a draft of the book to write into and, if it was kept, swaps it in when the block ends.

    Readers keep the version that they opened. An exception in the block, or a crash at any moment, leaves the book
    as it was. Raises BookLocked when somebody else writes for longer than `wait` seconds, BookError when the book
    cannot be copied.
    """
    require_book(book)
    book = book.resolve()  # a link to a book stays a link
    with lock.writers_lock(book, wait), _no_foreign_writer(book):
        _clear_leftovers(book)
        _require_room(book)
        draft_path = _draft_path(book)
        try:
            _copy(book, draft_path)
            with _opened(draft_path, {}) as con:
                migrate.check_known(migrate.applied(con), str(book))
                migrated = bool(migrate.pending(con))
                migrate.apply_pending(con)
                draft = Draft(con, migrated)
                yield draft
                if draft.kept:
                    con.execute("checkpoint")
            if draft.kept and draft.rewritten:
                _rewrite(draft_path)
            if draft.kept:
                _swap_in(draft_path, book)
            if draft.outcome is not None:
                lock.record_look(book, draft.outcome)
        finally:
            _remove_draft(draft_path)


def require_book(book: Path) -> None:
    """Refuses a path where there is no file."""
    if book.is_dir():
        raise UsageError(f"{book} is a folder, not a book.")
    if not book.exists():
        raise UsageError(f"there is no book {book}; make one with `driftbook new {book}`.")


@contextmanager
def _opened(path: Path, config: dict[str, str]) -> Iterator[duckdb.DuckDBPyConnection]:
    try:
        con = duckdb.connect(path, config=dict(config))
    except duckdb.Error as error:
        raise BookError(f"the book cannot be opened: {_first_line(error)}") from error
    try:
        for setting in _SETTINGS:
            con.execute(setting)
        yield con
    finally:
        con.close()


@contextmanager
def _no_foreign_writer(book: Path) -> Iterator[None]:
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


def _draft_path(book: Path) -> Path:
    # in a folder of its own, so that what DuckDB writes beside the draft is nobody else's to read
    folder = book.with_name(f".driftbook-draft-{os.getpid()}-{book.name}")
    folder.mkdir(mode=0o700, exist_ok=True)
    return folder / "draft.duckdb"


def _leftovers(book: Path) -> list[Path]:
    return [
        path
        for path in book.parent.glob(".driftbook-draft-*")
        if path.name.removeprefix(".driftbook-draft-").partition("-")[2] == book.name
    ]


def _clear_leftovers(book: Path) -> None:
    """Removes what an earlier crash left, and puts a WAL back that was set aside for a swap that did not happen."""
    for path in _leftovers(book):
        _remove(path)
    aside = _aside(book)
    if aside.exists() and _wal(book).exists():
        raise BookError(
            f"{aside.name} and {_wal(book).name} beside {book} both hold changes of a foreign writer; "
            "look which belongs to the book and move the other away."
        )
    if aside.exists():
        if _identity_file(book).exists() and _identity_file(book).read_text() == _identity(book):
            aside.rename(_wal(book))
        else:
            aside.unlink()
    _remove(_identity_file(book))


def _remove_draft(draft: Path) -> None:
    _remove(draft.parent)


def _remove(path: Path) -> None:
    if path.is_dir():
        shutil.rmtree(path, ignore_errors=True)
    else:
        path.unlink(missing_ok=True)


def _require_room(book: Path) -> None:
    size = book.stat().st_size
    needed = size + size // 4 + _ROOM_TO_WORK
    free = shutil.disk_usage(book.parent).free
    if free < needed:
        raise BookError(
            f"too little room beside {book}: a run needs {needed >> 20} MiB and {free >> 20} MiB are free; make room."
        )


def _copy(book: Path, draft: Path) -> None:
    """Copies the book and, if a foreign writer left one, the write-ahead log that belongs to it."""
    _copy_file(book, draft)
    if _wal(book).exists():
        _copy_file(_wal(book), _wal(draft))


def _copy_file(source: Path, target: Path) -> None:
    try:
        with source.open("rb") as reading, _created(target) as writing:
            left = os.fstat(reading.fileno()).st_size
            while left > 0:
                done = os.copy_file_range(reading.fileno(), writing.fileno(), min(left, _CHUNK))
                if done == 0:
                    break
                left -= done
    except OSError as error:
        if error.errno not in (errno.EXDEV, errno.ENOSYS, errno.EOPNOTSUPP, errno.EINVAL):
            raise BookError(f"cannot copy {source} for a run: {error.strerror}.") from error
        target.unlink(missing_ok=True)
        shutil.copyfile(source, target)


def _created(target: Path) -> BinaryIO:
    return os.fdopen(os.open(target, os.O_WRONLY | os.O_CREAT | os.O_EXCL, 0o600), "wb")


def _swap_in(draft: Path, book: Path) -> None:
    """Puts the finished draft in the book's place: durable before it is visible, and visible at once."""
    if _wal(draft).exists():
        raise BookError(f"the draft of {book} was not written out in full; nothing was changed, run it again.")
    before = book.stat()
    draft.chmod(before.st_mode & 0o7777)
    with suppress(PermissionError):
        os.chown(draft, before.st_uid, before.st_gid)
    _sync(draft)
    _set_wal_aside(book)
    draft.replace(book)
    _sync(book.parent)
    _remove(_aside(book))
    _remove(_identity_file(book))


def _rewrite(draft: Path) -> None:
    """Writes a draft's rows into a fresh file, in the order of the tables' keys, and puts it in the draft's place."""
    fresh = draft.with_name(f"fresh-{draft.name}")
    with _opened(fresh, {"storage_compatibility_version": "v1.2.0"}) as con:
        migrate.apply_pending(con)
        con.execute(f"attach '{str(draft).replace(chr(39), chr(39) * 2)}' as draft (read_only)")
        for (table,) in con.execute(query("tables_of"), ["draft"]).fetchall():
            con.execute(f"delete from base.{table}")
            con.execute(f"insert into base.{table} from draft.base.{table} order by all")
        con.execute("detach draft")
        con.execute("checkpoint")
    fresh.replace(draft)


def _set_wal_aside(book: Path) -> None:
    """A stale write-ahead log beside the new file would make it unopenable; its commits are in the draft."""
    if _wal(book).exists():
        _identity_file(book).write_text(_identity(book))
        _sync(_identity_file(book))
        _wal(book).rename(_aside(book))


def _identity(path: Path) -> str:
    stat = path.stat()
    return f"{stat.st_dev} {stat.st_ino} {stat.st_size} {stat.st_mtime_ns}"


def _wal(path: Path) -> Path:
    return path.with_name(path.name + ".wal")


def _aside(book: Path) -> Path:
    return book.with_name(f".driftbook-aside-{book.name}.wal")


def _identity_file(book: Path) -> Path:
    return book.with_name(f".driftbook-aside-{book.name}.id")


def _sync(path: Path) -> None:
    descriptor = os.open(path, os.O_RDONLY)
    try:
        os.fsync(descriptor)
    finally:
        os.close(descriptor)


def _first_line(error: Exception) -> str:
    return str(error).splitlines()[0]
