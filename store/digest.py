"""Digests: what a run put into and closed in each table, as bytes that anyone can compute again.

A row's bytes are its columns in the table's order. Each column is one mark (1 a value, 0 NULL) and then its value:
integers, times and dates as little-endian two's complement of their width, doubles as IEEE 754 little-endian,
booleans as one byte, text as its length in UTF-8 bytes (four bytes, little-endian) and the bytes. A NULL has zeros in
place of its value, and an empty text. A leaf is SHA-256 over the number of rows that came in (eight bytes,
little-endian), the SHA-256 of these rows, the number of rows that were closed, and the SHA-256 of their keys, all in
key order.
"""

from __future__ import annotations

import hashlib
from collections.abc import Iterable, Iterator
from dataclasses import dataclass
from typing import NamedTuple

import duckdb
import numpy as np
import pyarrow as pa
import pyarrow.compute as pc
from numpy.typing import NDArray

from driftbook.store.tables import Tracked

_ROWS_AT_ONCE = 1_000_000
_ROWS_ENCODED_AT_ONCE = 50_000
_NO_ROWS = (0, hashlib.sha256().digest())


class Leaf(NamedTuple):
    """The digest of what one run did to one table for one series (None: a table without series)."""

    run_id: int
    table_name: str
    series_id: int | None
    migration: int
    rows_in: int
    rows_closed: int
    sha256: str


def leaves(
    con: duckdb.DuckDBPyConnection,
    table: Tracked,
    columns: list[str],
    runs: tuple[int, int],
    migration: int,
    *,
    series_id: int | None = None,
) -> Iterator[Leaf]:
    """The leaves of one table for all runs from runs[0] to runs[1], in the order of series and run.

    `columns` are those that the table had at these runs, without run_to, in their order. `series_id` asks for the
    leaves of one series alone.
    """
    batches = _batches(con, table, runs) if series_id is None else [(series_id, series_id)]
    for first, last in batches:
        came = _grouped_rows(con, table, columns, "run_from", runs, (first, last))
        went = _grouped_rows(con, table, list(table.key), "run_to", runs, (first, last)) if table.closes else {}
        for series_id, run_id in sorted(came.keys() | went.keys(), key=_nulls_first):
            rows_in, hash_in = came.get((series_id, run_id), _NO_ROWS)
            rows_closed, hash_closed = went.get((series_id, run_id), _NO_ROWS)
            told = rows_in.to_bytes(8, "little") + hash_in + rows_closed.to_bytes(8, "little") + hash_closed
            sha256 = hashlib.sha256(told).hexdigest()
            yield Leaf(run_id, table.name, series_id, migration, rows_in, rows_closed, sha256)


def row_bytes(table: pa.Table) -> bytes:
    """The bytes of all rows of an Arrow table, in order."""
    return b"".join(_encoded_runs(_laid_out(table))) if table.num_rows else b""


def _nulls_first(group: tuple[int | None, int]) -> tuple[int, int]:
    return (-1 if group[0] is None else group[0], group[1])


def _batches(
    con: duckdb.DuckDBPyConnection, table: Tracked, runs: tuple[int, int]
) -> Iterator[tuple[int | None, int | None]]:
    """Ranges of series that hold about a million touched rows each; one range without series otherwise."""
    if not table.by_series:
        yield None, None
        return
    closed = "or run_to between $low and $high" if table.closes else ""
    counts = con.execute(
        f"select series_id, count(*) from base.{table.name} where run_from between $low and $high {closed} "
        "group by series_id order by series_id",
        {"low": runs[0], "high": runs[1]},
    ).fetchall()
    first: int | None = None
    previous: int | None = None
    rows = 0
    for series_id, count in counts:
        if first is not None and rows + count > _ROWS_AT_ONCE:
            yield first, previous
            first, rows = None, 0
        first = series_id if first is None else first
        previous = series_id
        rows += count
    if first is not None:
        yield first, previous


def _grouped_rows(
    con: duckdb.DuckDBPyConnection,
    table: Tracked,
    columns: list[str],
    run_column: str,
    runs: tuple[int, int],
    series: tuple[int | None, int | None],
) -> dict[tuple[int | None, int], tuple[int, bytes]]:
    """The rows of each (series, run): how many, and the SHA-256 of their bytes."""
    group = ["series_id", run_column] if table.by_series else [run_column]
    where = f"{run_column} between {runs[0]} and {runs[1]}"
    if table.by_series:
        where += f" and series_id between {series[0]} and {series[1]}"
    select = ", ".join(f'"{column}"' for column in columns)
    marks = ", ".join(f"{column} as _{column}" for column in group)
    order = ", ".join([*group, *table.key])
    rows = con.sql(f"select {select}, {marks} from base.{table.name} where {where} order by {order}").to_arrow_table()
    bounds = _group_bounds(rows, [f"_{column}" for column in group])
    found: list[tuple[int, bytes]] = []
    for groups in _some_at_once(bounds):
        first, last = groups[0][0], groups[-1][1]
        laid_out = _laid_out(rows.select(columns).slice(first, last - first))
        encoded = memoryview(b"".join(_encoded_runs(laid_out)))
        ends = _row_ends(laid_out).tolist()
        for start, stop in groups:
            group_bytes = encoded[ends[start - first] : ends[stop - first]]
            found.append((stop - start, hashlib.sha256(group_bytes).digest()))
    starts = pa.array([start for start, _ in bounds], pa.int64())
    run_ids = rows.column(f"_{run_column}").take(starts).to_pylist()
    series_ids = rows.column("_series_id").take(starts).to_pylist() if table.by_series else [None] * len(starts)
    return dict(zip(zip(series_ids, run_ids, strict=True), found, strict=True))


def _some_at_once(bounds: Iterable[tuple[int, int]]) -> Iterator[list[tuple[int, int]]]:
    """Groups that are encoded together, so that neither a group nor a million rows cost more than they must."""
    some: list[tuple[int, int]] = []
    for start, stop in bounds:
        if some and stop - some[0][0] > _ROWS_ENCODED_AT_ONCE:
            yield some
            some = []
        some.append((start, stop))
    if some:
        yield some


def _group_bounds(rows: pa.Table, group: list[str]) -> list[tuple[int, int]]:
    if rows.num_rows == 0:
        return []
    changed = np.zeros(rows.num_rows, dtype=bool)
    changed[0] = True
    for name in group:
        values = rows.column(name).combine_chunks().to_numpy(zero_copy_only=False)
        changed[1:] |= values[1:] != values[:-1]
    starts = np.flatnonzero(changed).tolist()
    return list(zip(starts, [*starts[1:], rows.num_rows], strict=True))


def _laid_out(rows: pa.Table) -> list[_Column]:
    return [_Column.of(rows.column(name)) for name in rows.column_names]


def _encoded_runs(columns: list[_Column]) -> Iterator[bytes]:
    """Runs of rows whose texts have the same lengths: these have one fixed layout and are encoded at once."""
    size = columns[0].marks.size
    changed = np.zeros(size, dtype=bool)
    changed[:1] = True
    for column in columns:
        if column.lengths is not None:
            changed[1:] |= column.lengths[1:] != column.lengths[:-1]
    starts = np.flatnonzero(changed)
    for start, stop in zip(starts, [*starts[1:], size], strict=True):
        yield _fixed_layout(columns, int(start), int(stop))


def _row_ends(columns: list[_Column]) -> NDArray[np.int64]:
    """Where each row ends in the bytes of all rows, and before them 0."""
    widths = np.zeros(columns[0].marks.size, np.int64)
    for column in columns:
        widths += 1 + (column.values.shape[1] if column.lengths is None else 4 + column.lengths.astype(np.int64))
    return np.concatenate([[0], np.cumsum(widths)])


@dataclass(frozen=True)
class _Column:
    """One column ready to be laid out: marks, and values of one width or text with its lengths."""

    marks: NDArray[np.uint8]
    values: NDArray[np.uint8]
    lengths: NDArray[np.int32] | None
    offsets: NDArray[np.int64] | None

    @classmethod
    def of(cls, chunked: pa.ChunkedArray) -> _Column:
        array = chunked.combine_chunks()
        if isinstance(array, pa.ChunkedArray):
            array = array.chunk(0) if array.num_chunks else pa.array([], chunked.type)
        marks = pc.is_valid(array).to_numpy(zero_copy_only=False).astype(np.uint8)
        if pa.types.is_string(array.type):
            return cls._text(marks, array)
        return cls(marks, _fixed_values(array), None, None)

    @classmethod
    def _text(cls, marks: NDArray[np.uint8], array: pa.Array) -> _Column:
        blob = pc.fill_null(array, "").cast(pa.large_binary())
        _, offsets_buffer, data = blob.buffers()
        offsets = np.frombuffer(offsets_buffer, np.int64)[blob.offset : blob.offset + len(blob) + 1]
        values = np.frombuffer(data, np.uint8) if data is not None else np.empty(0, np.uint8)
        return cls(marks, values, np.diff(offsets).astype(np.int32), offsets)

    def width(self, row: int) -> int:
        """The bytes that a row's value takes after its mark."""
        return self.values.shape[1] if self.lengths is None else 4 + int(self.lengths[row])

    def fill(self, out: NDArray[np.uint8], start: int, stop: int) -> None:
        """Writes rows start to stop; out has one row each and the mark's and the value's bytes as columns."""
        out[:, 0] = self.marks[start:stop]
        if self.lengths is None or self.offsets is None:
            out[:, 1:] = self.values[start:stop]
            return
        length = int(self.lengths[start])
        out[:, 1:5] = np.frombuffer(length.to_bytes(4, "little"), np.uint8)
        text = self.values[self.offsets[start] : self.offsets[stop]]
        out[:, 5:] = text.reshape(stop - start, length)


def _fixed_values(array: pa.Array) -> NDArray[np.uint8]:
    """The values of a column of fixed width as (rows, bytes), zeros for NULL."""
    if pa.types.is_boolean(array.type):
        values = pc.fill_null(array, False).to_numpy(zero_copy_only=False).astype(np.uint8)
    elif pa.types.is_floating(array.type):
        values = pc.fill_null(array, 0.0).to_numpy(zero_copy_only=False).astype("<f8")
    else:
        width = array.type.bit_width
        integers = array.view(pa.int64() if width == 64 else pa.int32())
        values = pc.fill_null(integers, 0).to_numpy(zero_copy_only=False).astype(f"<i{width // 8}")
    return np.ascontiguousarray(values).view(np.uint8).reshape(len(values), -1)


def _fixed_layout(columns: list[_Column], start: int, stop: int) -> bytes:
    widths = [1 + column.width(start) for column in columns]
    ends = np.cumsum(widths)
    out = np.empty((stop - start, int(ends[-1])), np.uint8)
    for column, width, end in zip(columns, widths, ends.tolist(), strict=True):
        column.fill(out[:, end - width : end], start, stop)
    return out.tobytes()
