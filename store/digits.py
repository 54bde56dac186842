"""Numbers to the digits that their interval supports."""

from __future__ import annotations

from math import ceil, floor, isfinite, log10

NO_END = "no end"


def with_interval(value: float | None, lower: float | None, upper: float | None, unit: str = "") -> str:
    """`19.8 (18.1–21.7)`; an open end as `41 d (12 d – no end)`, no value as its interval alone."""
    places = decimal_places(value, lower, upper)
    space = f" {unit}" if unit else ""
    ends = [NO_END if end is None else f"{end:.{places}f}{space}" for end in (lower, upper)]
    dash = " – " if space or any(end == NO_END or end.startswith("-") for end in ends) else "–"
    shown = "–" if value is None else f"{value:.{places}f}{space}"
    return f"{shown} ({dash.join(ends)})" if (lower, upper) != (None, None) else shown


def decimal_places(value: float | None, lower: float | None, upper: float | None) -> int:
    """Decimals so that the half-width of the interval keeps two digits; without an interval, three of the value."""
    known = [end for end in (lower, value, upper) if end is not None and isfinite(end)]
    if not known:
        return 0
    width = (max(known) - min(known)) / (2 if lower is not None and upper is not None else 1)
    if width > 0:
        rounded = float(f"{width:.1e}")
        return max(0, 1 - floor(log10(rounded)))
    size = max(abs(number) for number in known)
    return max(0, 3 - ceil(log10(size))) if size > 0 else 0
