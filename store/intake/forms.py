"""Strptime forms that DuckDB reads in bulk just as Python reads them one by one."""

from __future__ import annotations

import re
from dataclasses import dataclass

_DIRECTIVE = re.compile(r"%(.)")
_IN_BULK = frozenset("YymdHMSbB")
_CLOCK = frozenset("HMS")
# Two numbers without a mark between them can be told apart only if they are padded.
_APART = re.compile(r"(?:[^%0-9]*%[YymdHMS](?=[^%0-9]|$))+[^%0-9]*")


@dataclass(frozen=True)
class Form:
    """A strptime form as DuckDB writes it, padded with zeros and without; None: not read in bulk."""

    padded: str | None = None
    unpadded: str | None = None
    has_clock: bool = False


def plain_form(form: str) -> Form:
    """A form that is made of years, months, days and clock times alone can be read in bulk."""
    letters = _DIRECTIVE.findall(form)
    if not form.isascii() or not _IN_BULK.issuperset(letters) or len(set(letters)) != len(letters):
        return Form()
    unpadded = re.sub(r"%([mdH])", r"%-\1", form) if _APART.fullmatch(form) else None
    return Form(form, unpadded, has_clock=not _CLOCK.isdisjoint(letters))
