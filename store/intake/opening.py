"""Opening a source: what format it has, which bytes it is, and what its rows are."""

from __future__ import annotations

import hashlib
import re
from collections.abc import Iterator
from contextlib import ExitStack, contextmanager
from pathlib import Path
from typing import BinaryIO, cast

import duckdb
import polars as pl

from driftbook.store.errors import IntakeError
from driftbook.store.intake.delimited import open_delimited
from driftbook.store.intake.frames import as_polars
from driftbook.store.intake.json_lines import open_json_lines
from driftbook.store.intake.landing import landed
from driftbook.store.intake.layouts import laid_out
from driftbook.store.intake.options import Options
from driftbook.store.intake.source import Rows, Source
from driftbook.store.intake.tables import open_arrow, open_frame, open_parquet

_FIRST_BYTES = 1 << 12
_PARQUET_MARK = b"PAR1"
_ARROW_FILE_MARK = b"ARROW1"
_ARROW_STREAM_MARK = b"\xff\xff\xff\xff"
_OBJECT = re.compile(rb"(?:\xef\xbb\xbf)?\s*\{")


class _Digest:
    """A file to write to that keeps nothing but the digest."""

    def __init__(self) -> None:
        self.sha256 = hashlib.sha256()

    def write(self, data: bytes) -> int:
        self.sha256.update(data)
        return len(data)


@contextmanager
def opened(con: duckdb.DuckDBPyConnection, origin: object, options: Options, name: str) -> Iterator[tuple[str, Rows]]:
    """The digest and the rows of a source; one that somebody writes to meanwhile is not taken in."""
    if not isinstance(origin, Path):
        frame = as_polars(origin, name)
        source: Source = open_frame(con, frame, name, options.decimal)
        try:
            yield _digest_of_frame(frame), laid_out(source, options)
        finally:
            source.close(con)
        return
    with ExitStack() as stack:
        with _said_plainly(name):
            given, plain = stack.enter_context(landed(origin, name))
            before = _state(given)
            digest = digest_of_file(given)
            source = _source(con, plain, name, options.decimal)
        stack.callback(source.close, con)
        yield digest, laid_out(source, options)
        with _said_plainly(name):
            after = _state(given)
        if after != before:
            raise IntakeError(f"{name} changed while it was read; take it in again once it is complete.")


@contextmanager
def _said_plainly(name: str) -> Iterator[None]:
    try:
        yield
    except OSError as problem:
        raise IntakeError(f"{name} cannot be read: {problem.strerror or str(problem).rstrip('.')}.") from problem
    except ValueError as problem:  # a path with a NUL in it
        raise IntakeError(f"{name!r} cannot be read: {problem}.") from problem


def _digest_of_frame(frame: pl.DataFrame) -> str:
    """SHA-256 over a frame's columns in Arrow's form."""
    written = _Digest()
    frame.rechunk().write_ipc_stream(cast(BinaryIO, written))
    return written.sha256.hexdigest()


def digest_of_file(path: Path) -> str:
    """SHA-256 over a file's bytes."""
    with path.open("rb") as file:
        return hashlib.file_digest(file, "sha256").hexdigest()


def _state(path: Path) -> tuple[int, ...]:
    found = path.stat()
    return found.st_dev, found.st_ino, found.st_size, found.st_mtime_ns


def _source(con: duckdb.DuckDBPyConnection, path: Path, name: str, decimal: str) -> Source:
    """The table in a file; its format is told by its first bytes."""
    with path.open("rb") as file:
        first = file.read(_FIRST_BYTES)
    if first.startswith(_PARQUET_MARK):
        return open_parquet(con, path, name, decimal)
    if first.startswith((_ARROW_FILE_MARK, _ARROW_STREAM_MARK)):
        return open_arrow(con, path, name, decimal, is_stream=first.startswith(_ARROW_STREAM_MARK))
    if _OBJECT.match(first):
        return open_json_lines(con, path, name, decimal)
    return open_delimited(path, name)
