"""Reading one number: plain decimal or scientific notation with a point, and nothing else."""

from __future__ import annotations

import math
import re

from driftbook.store.intake.reasons import Reason

_PLAIN = re.compile(r"[+-]?(?:[0-9]+\.?[0-9]*|\.[0-9]+)(?:[eE][+-]?[0-9]+)?")
_NOT_FINITE = re.compile(r"[+-]?(?:inf|infinity|nan)", re.IGNORECASE)


def read_number(text: str) -> float | Reason:
    """The number that a trimmed, non-empty text says, or why it says none."""
    if not _PLAIN.fullmatch(text):
        return Reason.NOT_FINITE if _NOT_FINITE.fullmatch(text) else Reason.NOT_A_NUMBER
    number = float(text)
    return number if math.isfinite(number) else Reason.NOT_FINITE
