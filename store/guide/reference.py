"""The page `reference.md`, from the book's own dictionary: `python -m driftbook.store.guide.reference` prints it."""

from __future__ import annotations

import tempfile
from collections.abc import Iterable
from pathlib import Path

from driftbook.store.reader import connect
from driftbook.store.swap import create

_HEAD = """# SQL reference

Printed from the view `dictionary` of an empty book by `python -m driftbook.store.guide.reference`. Views and macros
work in any DuckDB client from 1.2 on; functions need a connection made by driftbook (`driftbook sql`,
`driftbook.store.connect`). Units in words: x is the unit of the series, t a year (a second under the clock `seconds`),
1 a pure number.
"""
_ALL_VERSIONS = """## All versions

The columns of the view, then `run_from`, `run_to`, `in_force_from`, `in_force_to`: the runs and the moments from and
until which the row was in force.
"""

Entry = tuple[str, str | None, str | None, str, str | None]


def page() -> str:
    """The page, from the dictionary of a new book."""
    with tempfile.TemporaryDirectory() as folder:
        book = Path(folder) / "empty.duckdb"
        create(book)
        with connect(book) as con:
            entries: list[Entry] = con.execute(
                "select d.name, d.column_name, d.unit, d.meaning, d.example from dictionary d"
            ).fetchall()
    return "\n".join([_HEAD, *_views(entries), *_others(entries)])


def _views(entries: list[Entry]) -> Iterable[str]:
    yield "## Views\n"
    for name in sorted({name for name, column, *_ in entries if column is not None}):
        (meaning,) = [entry[3] for entry in entries if entry[0] == name and entry[1] is None]
        yield f"### {name}\n\n{meaning}\n"
        yield _table(
            ("column", "unit", "meaning"),
            [(f"`{column}`", unit or "", text) for of, column, unit, text, _ in entries if of == name and column],
        )


def _others(entries: list[Entry]) -> Iterable[str]:
    whole = sorted((name, text, example or "") for name, column, _, text, example in entries if column is None)
    views = {name for name, column, *_ in entries if column is not None}
    versions = [entry for entry in whole if entry[0].startswith("versions.")]
    macros = [entry for entry in whole if entry[2].startswith(f"from {entry[0]}(")]
    functions = [entry for entry in whole if entry not in macros and entry not in versions and entry[0] not in views]
    yield _ALL_VERSIONS
    yield _table(("view", "meaning"), [(f"`{name}`", text) for name, text, _ in versions])
    for title, kind in (("Macros", macros), ("Functions", functions)):
        yield f"## {title}\n"
        yield _table(("name", "meaning", "example"), [(f"`{name}`", text, f"`{query}`") for name, text, query in kind])


def _table(header: tuple[str, ...], rows: list[tuple[str, ...]]) -> str:
    lines = [header, ("---",) * len(header), *rows]
    return "\n".join("| " + " | ".join(cell.replace("|", "\\|") for cell in line) + " |" for line in lines) + "\n"


if __name__ == "__main__":
    print(page(), end="")
