"""What a line of a source means: one value of one series (long), or the values of many series at one time (wide)."""

from __future__ import annotations

from collections import Counter
from dataclasses import dataclass

import duckdb

from driftbook.store.errors import IntakeError
from driftbook.store.intake.columns import has_bars, places, time_place
from driftbook.store.intake.options import NUMBER_ROLES, Options
from driftbook.store.intake.reasons import Reason
from driftbook.store.intake.source import WHITESPACE, Fields, Source
from driftbook.store.sql import query

_MOST_COLUMNS = 1 << 20  # what `intake_row_key` has room for


def laid_out(source: Source, options: Options) -> LongRows | WideRows:
    """The rows of a source in the layout that is told."""
    if options.layout == "wide":
        return _wide(source, options)
    place = places(source.columns, options, source.name)
    return LongRows(source.name, source, options, place, has_bars(place))


@dataclass
class LongRows:
    """Each line is a row, and `place` says which column plays which role."""

    name: str
    source: Source
    options: Options
    place: dict[str, int | None]
    has_bars: bool

    def relation(self, con: duckdb.DuckDBPyConnection) -> tuple[str, dict[str, object]]:
        """One reading of the source."""
        sql, values = self.source.lines(con)
        texts = {role: self._text(role, at) for role, at in self.place.items()}
        layout = query("intake_long_rows").format(lines=sql, **texts)
        return layout, {**values, "series": self.options.series, **_blanks(self.options)}

    def fields_of(self, cell: int, text: str | None, fields: Fields) -> Fields | Reason | None:
        """Splits one line with care."""
        del cell, fields
        parts = self.source.split(text or "")
        if parts is None or isinstance(parts, Reason):
            return parts
        found = {role: None if at is None else parts[at] for role, at in self.place.items()}
        return found if self.options.series is None else {**found, "series": self.options.series}

    def _text(self, role: str, at: int | None) -> str:
        if at is None:
            return "null::varchar"
        if role not in NUMBER_ROLES:
            return self.source.field(at)
        return _unless_blank(self.source.number(at), self.options)


@dataclass
class WideRows:
    """Each cell beside the time is a row of the series that its column names; an empty cell says nothing.

    The cell is the number of its column; cell 0 stands for a line that cannot be split into cells.
    """

    name: str
    source: Source
    options: Options
    time_at: int
    has_bars: bool = False
    _parts: list[str] | Reason | None = None

    def relation(self, con: duckdb.DuckDBPyConnection) -> tuple[str, dict[str, object]]:
        """One reading of the source."""
        sql, values = self.source.lines(con)
        value = _unless_blank("number", self.options)
        texts = {"time": self.source.field(self.time_at), "numbers": self.source.numbers(), "value": value}
        layout = query("intake_wide_rows").format(lines=sql, **texts)
        told = {
            "names": [column.strip(WHITESPACE) for column in self.source.columns],
            "columns": len(self.source.columns),
            "time_cell": self.time_at + 1,
            "whitespace": WHITESPACE,
        }
        return layout, {**values, **told, **_blanks(self.options)}

    def fields_of(self, cell: int, text: str | None, fields: Fields) -> Fields | Reason | None:
        """Splits one line with care when it comes to its cell 0, and then gives one cell after another."""
        del fields
        if text is not None:
            self._parts = self.source.split(text)
        if self._parts is None or isinstance(self._parts, Reason):
            return self._parts if cell == 0 else None
        said = self._parts[cell - 1]
        if cell in (0, self.time_at + 1) or said in ("", *self.options.blank):
            return None
        name = self.source.columns[cell - 1].strip(WHITESPACE)
        return {**dict.fromkeys(NUMBER_ROLES), "series": name, "time": self._parts[self.time_at], "value": said}


def _wide(source: Source, options: Options) -> WideRows:
    if len(source.columns) >= _MOST_COLUMNS:
        raise IntakeError(f"{source.name} has {len(source.columns)} columns; up to {_MOST_COLUMNS - 1} can be read.")
    names = Counter(column.strip(WHITESPACE) for column in source.columns)
    for name, count in names.items():
        if name and count > 1:
            raise IntakeError(f"{source.name} has {count} columns {name!r}; in the wide layout each series has one.")
    return WideRows(source.name, source, options, time_place(source.columns, options, source.name))


def _unless_blank(number: str, options: Options) -> str:
    """A text that means an empty value becomes one."""
    if not options.blank:
        return number
    return f"case when list_contains($blank, trim({number}, $whitespace)) then '' else {number} end"


def _blanks(options: Options) -> dict[str, object]:
    return {"blank": list(options.blank), "whitespace": WHITESPACE} if options.blank else {}
