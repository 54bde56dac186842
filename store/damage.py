"""A damaged file: what of it can still be read.

DuckDB keeps a checksum of each block and refuses one that was changed on the disk. So whatever can be read is as it was
written, and reading every column of every table finds every damaged block that holds something.
"""

from __future__ import annotations

from collections.abc import Iterator
from dataclasses import dataclass

import duckdb

from driftbook.store.sql import query

_FEW_NAMES = 5
THE_WAY_BACK = "put the last good copy in its place and take in again what came since (store/guide/way_back.md)"


@dataclass(frozen=True)
class Damage:
    """Columns of one table that cannot be read to their end."""

    table_name: str
    columns: list[str]
    why: str
    series_spared: int
    series_hit: list[str]

    @property
    def sentence(self) -> str:
        """What is damaged and what is spared."""
        hit = ", ".join(self.series_hit[:_FEW_NAMES])
        more = " and others" if len(self.series_hit) > _FEW_NAMES else ""
        spared = f"; of {hit}{more}; {self.series_spared} other series can be read" if self.series_hit else ""
        return f"{self.table_name}: the file is damaged, {', '.join(self.columns)} cannot be read{spared} ({self.why})."


def is_damage(error: Exception) -> bool:
    """Whether an error of DuckDB says that a block is not as it was written."""
    return "Corrupt database file" in str(error)


def find_damage(con: duckdb.DuckDBPyConnection) -> list[Damage]:
    """Reads every column of every base table of the default catalog."""
    return list(_damages(con))


def _damages(con: duckdb.DuckDBPyConnection) -> Iterator[Damage]:
    for table, columns in con.execute(query("columns_of_base")).fetchall():
        refused = {column: _refusal(con, table, [column]) for column in columns}
        damaged = [column for column, why in refused.items() if why]
        if damaged:
            spared, hit = _by_series(con, table, damaged) if "series_id" in columns else (0, [])
            yield Damage(table, damaged, refused[damaged[0]], spared, hit)


def _refusal(con: duckdb.DuckDBPyConnection, table: str, columns: list[str], where: str = "true") -> str:
    """Why columns cannot be read; empty if they can."""
    hashed = ", ".join(f"bit_xor(hash({column}))" for column in columns)
    try:
        con.execute(f"select {hashed} from base.{table} where {where}").fetchall()
    except duckdb.Error as error:
        return str(error).splitlines()[0].rpartition("Error: ")[2]
    return ""


def _by_series(con: duckdb.DuckDBPyConnection, table: str, columns: list[str]) -> tuple[int, list[str]]:
    """How many series are spared and which are hit; none are named where their names cannot be read."""
    try:
        names = con.execute("select series_id, series from base.series order by series").fetchall()
    except duckdb.Error:
        return 0, []
    hit = [name for number, name in names if _refusal(con, table, columns, f"series_id = {int(number)}")]
    return len(names) - len(hit), hit
