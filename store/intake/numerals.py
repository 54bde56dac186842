"""Reading one number: plain decimal or scientific notation, and nothing else."""

from __future__ import annotations

import math
import re

from driftbook.store.intake.reasons import Reason

_PLAIN = re.compile(r"[+-]?(?:[0-9]+\.?[0-9]*|\.[0-9]+)(?:[eE][+-]?[0-9]+)?")
# the other one of the two is then no part of a number
_COMMA_FOR_POINT = str.maketrans(".,", ",.")
_NOT_FINITE = re.compile(r"[+-]?(?:inf|infinity|nan)", re.IGNORECASE)


def read_number(text: str, decimal: str = ".") -> float | Reason:
    """The number that a trimmed, non-empty text says, or why it says none; `decimal` is a point or a comma."""
    if decimal == ",":
        text = text.translate(_COMMA_FOR_POINT)
    if not _PLAIN.fullmatch(text):
        return Reason.NOT_FINITE if _NOT_FINITE.fullmatch(text) else Reason.NOT_A_NUMBER
    number = float(text)
    return number if math.isfinite(number) else Reason.NOT_FINITE
