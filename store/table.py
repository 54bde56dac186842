"""Rows as aligned text, safe to show on a terminal whatever the names in them are."""

from __future__ import annotations

import unicodedata
from collections.abc import Sequence
from datetime import datetime
from typing import Any

from rich.cells import cell_len

_GAP = "  "


def harmless(text: str) -> str:
    """Text with control and direction characters made visible, so that names from files cannot drive a terminal."""
    return text if text.isprintable() else "".join(_visible(character) for character in text)


def shortened(text: str, most: int = 400) -> str:
    """The beginning of a text from somebody else's file: a line may be as long as the file."""
    return text if len(text) <= most else f"{text[:most]}…"


def count_of(number: int, noun: str, nouns: str | None = None) -> str:
    """`1 window`, `2 windows`; `nouns` where an s does not make the plural."""
    return f"{number} {noun if number == 1 else nouns or noun + 's'}"


def columns(header: Sequence[str], rows: Sequence[Sequence[Any]]) -> str:
    """Rows as aligned columns without boxes; numbers to the right."""
    words = [[harmless(word(value)) for value in row] for row in rows]
    widths = [max([cell_len(name), *(cell_len(row[at]) for row in words)]) for at, name in enumerate(header)]
    right = [all(isinstance(row[at], int | float | None) for row in rows) for at in range(len(header))]
    lines = [_line(header, widths, right), *(_line(row, widths, right) for row in words)]
    return "\n".join(lines)


def word(value: Any) -> str:
    """A value as people read it; NULL is empty."""
    if value is None:
        return ""
    if isinstance(value, bool):
        return "true" if value else "false"
    if isinstance(value, float):
        return f"{value:.6g}"
    if isinstance(value, datetime):
        return _moment(value)
    return str(value)


def _moment(value: datetime) -> str:
    text = value.replace(tzinfo=None).isoformat(" ", "seconds" if not value.microsecond else "microseconds")
    return text.removesuffix(" 00:00:00") if value.tzinfo is None else text + "Z"


def _line(words: Sequence[str], widths: Sequence[int], right: Sequence[bool]) -> str:
    cells = []
    for text, width, to_the_right in zip(words, widths, right, strict=True):
        space = " " * (width - cell_len(text))
        cells.append(space + text if to_the_right else text + space)
    return _GAP.join(cells).rstrip()


def _visible(character: str) -> str:
    if unicodedata.category(character) in ("Cc", "Cf", "Cs", "Co", "Cn", "Zl", "Zp"):
        return character.encode("unicode_escape", "surrogatepass").decode()
    return character
