"""Copy, work, swap: the one place where a book is opened for writing, and always a private copy of it."""

from __future__ import annotations

import errno
import os
import shutil
from collections.abc import Iterator
from contextlib import contextmanager
from pathlib import Path
from typing import BinaryIO

import duckdb

from driftbook.store import compaction, interrupts, lock, migrate
from driftbook.store.damage import is_damage
from driftbook.store.errors import BookError, UsageError
from driftbook.store.foreign import (
    drop_wal_set_aside,
    no_foreign_writer,
    put_wal_back,
    set_wal_aside,
    sync,
    wal,
)
from driftbook.store.sql import query

_CHUNK = 64 << 20
_ROOM_TO_WORK = 32 << 20
# Schemas of a book; a catalog of the same name would make every qualified name ambiguous.
_RESERVED_STEMS = {"base", "versions", "main", "temp", "system", "information_schema", "pg_catalog"}
_SETTINGS = (
    "set TimeZone = 'UTC'",
    # DuckDB 2.0.1 pushes a TRY_CAST into the CSV scan as a hard cast and then drops rows.
    "set disabled_optimizers = 'type_pushdown'",
)


class Draft:
    """A private copy of the book, open for writing.

    `kept` says that it shall take the book's place when the block ends, `rewritten` that its rows shall be written into
    a fresh file first, so that nothing of what was deleted is left, `outcome` what the lock file notes of it. A draft
    is also rewritten when that is worth it (`compaction`) and there is room.
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
    with _looking_at(book):
        if book.exists():
            raise UsageError(f"{book} exists already; choose another name or remove it yourself.")
        if not book.parent.is_dir():
            raise UsageError(f"there is no folder {book.parent}; make it first.")
    with lock.writers_lock(book, 0):
        _clear_drafts(book)
        draft = _draft_path(book)
        try:
            with _refusals_told(draft), _opened(draft, {"storage_compatibility_version": "v1.2.0"}) as con:
                migrate.apply_pending(con)
                con.execute("checkpoint")
            sync(draft)
            _link(draft, book)
            sync(book.parent)
        finally:
            _remove_draft(draft)
        lock.record_look(book, "made the book")


def _link(draft: Path, book: Path) -> None:
    """Gives the draft the book's name; a link, unlike a rename, never replaces what came into being meanwhile."""
    try:
        with interrupts.swapping():
            os.link(draft, book)
    except FileExistsError:
        raise UsageError(f"{book} exists already; choose another name or remove it yourself.") from None
    except OSError as error:
        raise BookError(f"cannot make {book}: {error.strerror}.") from error


@contextmanager
def rewriting(book: Path, wait: float) -> Iterator[Draft]:
    """Gives a draft of the book to write into and, if it was kept, swaps it in when the block ends.

    Readers keep the version that they opened. An exception in the block, or a crash at any moment, leaves the book
    as it was. Raises BookLocked when somebody else writes for longer than `wait` seconds, BookError when the book
    cannot be copied or written.
    """
    require_book(book)
    book = book.resolve()  # a link to a book stays a link
    if not os.access(book, os.W_OK):
        raise BookError(f"{book} is not yours to write: its rights say so.")
    with lock.writers_lock(book, wait), no_foreign_writer(book):
        _clear_drafts(book)
        put_wal_back(book)
        _require_room(book)
        draft_path = _draft_path(book)
        try:
            _copy(book, draft_path)
            with _refusals_told(draft_path):
                with _opened(draft_path, {}) as con:
                    migrate.check_known(migrate.applied(con), str(book))
                    migrated = bool(migrate.pending(con))
                    migrate.apply_pending(con)
                    draft = Draft(con, migrated)
                    yield draft
                    if draft.kept:
                        con.execute("checkpoint")
                        worth_it = compaction.worth_it(con) and _room_for(draft_path)
                if draft.kept and (draft.rewritten or worth_it):
                    _rewrite(draft_path, asked_for=draft.rewritten)
            if draft.kept:
                _swap_in(draft_path, book)
            if draft.outcome is not None:
                lock.record_look(book, draft.outcome)
        finally:
            _remove_draft(draft_path)


def require_book(book: Path) -> None:
    """Refuses a path where there is no file."""
    with _looking_at(book):
        if book.is_dir():
            raise UsageError(f"{book} is a folder, not a book.")
        if not book.exists():
            raise UsageError(f"there is no book {book}; make one with `driftbook new {book}`.")


@contextmanager
def _looking_at(book: Path) -> Iterator[None]:
    try:
        yield
    except OSError as error:
        raise BookError(f"cannot look at {book}: {error.strerror}.") from error


@contextmanager
def _refusals_told(draft: Path) -> Iterator[None]:
    """What the machine refuses while a draft is written becomes one sentence; other errors pass."""
    try:
        yield
    except duckdb.OutOfMemoryException as error:
        raise BookError(f"the run needs more memory than there is: {_first_line(error)}") from error
    except duckdb.Error as error:
        if is_damage(error):
            raise BookError(
                f"the book's file is damaged: {_first_line(error)}; "
                "`driftbook verify` says what can still be read, and the way back."
            ) from error
        if draft.parent.name not in str(error):
            raise
        reason = _first_line(error).rpartition('": ')[2].rstrip(".")
        raise BookError(f"the run cannot be written beside the book: {reason}; the book is unchanged.") from error


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


def _draft_path(book: Path) -> Path:
    # in a folder of its own, so that what DuckDB writes beside the draft is nobody else's to read
    folder = book.with_name(f".driftbook-draft-{os.getpid()}-{book.name}")
    try:
        folder.mkdir(mode=0o700)
    except OSError as error:
        raise BookError(f"cannot write beside {book}: {error.strerror}; the folder must be writable.") from error
    return folder / "draft.duckdb"


def _clear_drafts(book: Path) -> None:
    """Removes the drafts of writers that crashed: whoever holds the lock is the only writer there is."""
    for path in book.parent.glob(".driftbook-draft-*"):
        if path.name.removeprefix(".driftbook-draft-").partition("-")[2] == book.name:
            _remove(path)


def _remove_draft(draft: Path) -> None:
    _remove(draft.parent)


def _remove(path: Path) -> None:
    if path.is_dir():
        shutil.rmtree(path, ignore_errors=True)
    else:
        path.unlink(missing_ok=True)


def _require_room(book: Path) -> None:
    free = shutil.disk_usage(book.parent).free
    if free < _room_to_write(book):
        raise BookError(
            f"too little room beside {book}: a run needs {_room_to_write(book) >> 20} MiB and {free >> 20} MiB are "
            "free; make room."
        )


def _room_for(draft: Path) -> bool:
    return shutil.disk_usage(draft.parent).free >= _room_to_write(draft)


def _room_to_write(like: Path) -> int:
    size = like.stat().st_size
    return size + size // 4 + _ROOM_TO_WORK


def _copy(book: Path, draft: Path) -> None:
    """Copies the book and, if a foreign writer left one, the write-ahead log that belongs to it."""
    _copy_file(book, draft)
    if wal(book).exists():
        _copy_file(wal(book), wal(draft))


def _copy_file(source: Path, target: Path) -> None:
    try:
        with source.open("rb") as reading, _created(target) as writing:
            _copy_in_the_kernel(reading, writing)
            shutil.copyfileobj(reading, writing, _CHUNK)
    except OSError as error:
        raise BookError(f"cannot copy {source} for a run: {error.strerror}.") from error


def _copy_in_the_kernel(reading: BinaryIO, writing: BinaryIO) -> None:
    """As much as the file system can copy by itself, which is all or nothing."""
    try:
        while os.copy_file_range(reading.fileno(), writing.fileno(), _CHUNK):
            pass
    except OSError as error:
        if error.errno not in (errno.EXDEV, errno.ENOSYS, errno.EOPNOTSUPP, errno.EINVAL):
            raise


def _created(target: Path) -> BinaryIO:
    return os.fdopen(os.open(target, os.O_WRONLY | os.O_CREAT | os.O_EXCL, 0o600), "wb")


def _swap_in(draft: Path, book: Path) -> None:
    """Puts the finished draft in the book's place: durable before it is visible, and visible at once."""
    if wal(draft).exists():
        raise BookError(f"the draft of {book} was not written out in full; nothing was changed, run it again.")
    try:
        _make_alike(draft, book.stat())
        sync(draft)
        with interrupts.swapping():
            set_wal_aside(book, draft)
            draft.replace(book)
    except OSError as error:
        put_wal_back(book)
        raise BookError(f"the run cannot take the place of {book}: {error.strerror}; it is unchanged.") from error
    try:
        sync(book.parent)
        drop_wal_set_aside(book)
    except OSError as error:
        raise BookError(
            f"the run is in {book}, but the disk did not confirm it: {error.strerror}; "
            "look after the disk, then run `driftbook verify`."
        ) from error


def _make_alike(draft: Path, before: os.stat_result) -> None:
    """Gives a draft the rights and owners of the book; a group that we may not give it gets no rights in its place."""
    rights = before.st_mode & 0o7777
    try:
        os.chown(draft, before.st_uid, before.st_gid)
    except PermissionError:  # only root may give a file away; its group can be any that we are in
        try:
            os.chown(draft, -1, before.st_gid)
        except PermissionError:
            rights &= ~0o070
    draft.chmod(rights)


def _rewrite(draft: Path, *, asked_for: bool) -> None:
    """Writes a draft's rows into a fresh file, in the order of the tables' keys, and puts it in the draft's place.

    What somebody else made in the book would not be in the fresh file: then it is not written, unless it was asked for.
    """
    fresh = draft.with_name(f"fresh-{draft.name}")
    with _opened(fresh, {"storage_compatibility_version": "v1.2.0"}) as con:
        migrate.apply_pending(con)
        con.execute(f"attach '{str(draft).replace(chr(39), chr(39) * 2)}' as draft (read_only)")
        foreign = con.execute(query("only_in_draft")).fetchall()
        if foreign and asked_for:
            raise BookError(f"driftbook did not make {foreign[0][0]} in the book; drop it first, or it would be lost.")
        if foreign:
            return
        for (table,) in con.execute(query("tables_of"), ["draft"]).fetchall():
            con.execute(f"delete from base.{table}")
            con.execute(f"insert into base.{table} from draft.base.{table} order by all")
        con.execute("detach draft")
        con.execute("checkpoint")
    fresh.replace(draft)


def _first_line(error: Exception) -> str:
    return str(error).splitlines()[0]
