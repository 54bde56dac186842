"""Opening a source: what format it has, which bytes it is, and what its rows are."""

from __future__ import annotations

import hashlib
from collections.abc import Iterator
from contextlib import contextmanager
from pathlib import Path
from typing import BinaryIO, cast

import duckdb
import polars as pl

from driftbook.store.errors import IntakeError
from driftbook.store.intake.delimited import open_delimited
from driftbook.store.intake.options import Options
from driftbook.store.intake.source import Rows
from driftbook.store.intake.tables import open_frame, open_parquet

_PARQUET_MARK = b"PAR1"


class _Digest:
    """A file to write to that keeps nothing but the digest."""

    def __init__(self) -> None:
        self.sha256 = hashlib.sha256()

    def write(self, data: bytes) -> int:
        self.sha256.update(data)
        return len(data)


def _digest_of(source: Path | pl.DataFrame) -> str:
    """SHA-256 over a file's bytes, or over a frame's columns in Arrow's form."""
    if isinstance(source, pl.DataFrame):
        written = _Digest()
        source.rechunk().write_ipc_stream(cast(BinaryIO, written))
        return written.sha256.hexdigest()
    with source.open("rb") as file:
        return hashlib.file_digest(file, "sha256").hexdigest()


@contextmanager
def opened(
    con: duckdb.DuckDBPyConnection, source: Path | pl.DataFrame, options: Options, name: str
) -> Iterator[tuple[str, Rows]]:
    """The digest and the rows of a source; one that somebody writes to meanwhile is not taken in."""
    try:
        before = _state(source)
        rows = _rows(con, source, options, name)
    except OSError as problem:
        raise IntakeError(f"{source} cannot be read: {problem.strerror}.") from problem
    try:
        yield _digest_of(source), rows
        if _state(source) != before:
            raise IntakeError(f"{name} changed while it was read; take it in again once it is complete.")
    finally:
        rows.close(con)


def _state(source: Path | pl.DataFrame) -> tuple[int, ...]:
    if isinstance(source, pl.DataFrame):
        return ()
    found = source.stat()
    return found.st_dev, found.st_ino, found.st_size, found.st_mtime_ns


def _rows(con: duckdb.DuckDBPyConnection, source: Path | pl.DataFrame, options: Options, name: str) -> Rows:
    """The rows of a source; its format is told by its first bytes."""
    if isinstance(source, pl.DataFrame):
        return open_frame(con, source, options, name)
    with source.open("rb") as file:
        mark = file.read(len(_PARQUET_MARK))
    return open_parquet(con, source, options) if mark == _PARQUET_MARK else open_delimited(source, options)
