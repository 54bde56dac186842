"""The schema of a fresh book as text: `python tests/store/schema_dump.py > tests/store/schema.sql`."""

import sys
from pathlib import Path
from tempfile import TemporaryDirectory

import duckdb

from driftbook.store import create

OBJECTS = """
select schema_name || '.' || table_name as name, sql, comment from duckdb_tables() where not internal
union all
select schema_name || '.' || view_name, sql, comment from duckdb_views() where not internal
union all
select schema_name || '.' || function_name, 'macro (' || array_to_string(parameters, ', ') || ') ' || macro_definition,
  comment
from duckdb_functions() where not internal
union all
select schema_name || '.' || table_name || '.' || column_name, data_type, comment
from duckdb_columns() where not internal and comment is not null
order by 1, 2
"""


def dump(book: Path) -> str:
    create(book)
    with duckdb.connect(book, read_only=True) as con:
        rows = con.execute(OBJECTS).fetchall()
    described = (f"{name}\n  {sql}" + (f"\n  -- {comment}" if comment else "") for name, sql, comment in rows)
    return "\n".join(described) + "\n"


if __name__ == "__main__":
    with TemporaryDirectory() as folder:
        sys.stdout.write(dump(Path(folder) / "fresh.duckdb"))
