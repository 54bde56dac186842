"""When a run ends with the book written out afresh, in the order of the tables' keys and without free blocks.

New rows lie behind old ones, whatever their series, so each run scatters a series a little more. A rewrite is worth it
each time when the rows that runs have written, all in all, have doubled: it then costs about as much as writing the new
half did, and half of the rows at least lie in order. It is also worth it when more than half of the file is free.
"""

from __future__ import annotations

import duckdb

from driftbook.store.sql import only_row, query

# Two of DuckDB's row groups: below this nothing is ever far away.
FIRST_ROWS = 1 << 18
_FEW_BLOCKS = 64


def worth_it(con: duckdb.DuckDBPyConnection) -> bool:
    """Whether a draft, whose run is finished and checkpointed, is to be written out afresh."""
    before, last = only_row(con, query("rows_written"))
    free, blocks = only_row(con, "select free_blocks, total_blocks from pragma_database_size()")
    return has_doubled(before, last) or (free > _FEW_BLOCKS and 2 * free > blocks)


def has_doubled(before: int, last: int) -> bool:
    """Whether the last run took the rows past `FIRST_ROWS` or a doubling of it; one that wrote most of them did so in
    order, and that is the order which there is to be.
    """
    return last < before and _doublings(before + last) > _doublings(before)


def _doublings(rows: int) -> int:
    return (rows // FIRST_ROWS).bit_length()
