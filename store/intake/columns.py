"""Which column of a source plays which role."""

from __future__ import annotations

from collections.abc import Mapping, Sequence

from driftbook.store.errors import IntakeError
from driftbook.store.intake.options import BAR_ROLES, ROLES, Options

USUAL_NAMES: Mapping[str, frozenset[str]] = {
    "series": frozenset({"series", "name", "symbol", "ticker", "id", "instrument", "code"}),
    "time": frozenset({"time", "date", "timestamp", "datetime", "observed_at", "day"}),
    "value": frozenset({"value", "price", "close", "c", "settle", "settlement", "last", "rate"}),
    "open": frozenset({"open", "o"}),
    "high": frozenset({"high", "h"}),
    "low": frozenset({"low", "l"}),
    "volume": frozenset({"volume", "v"}),
}
_NEEDED = ("series", "time", "value")


def places(found: Sequence[str], options: Options, source: str) -> dict[str, int | None]:
    """For each role the place of its column, counted from 0; None for a role that the source does not have."""
    plain = [_plain(column) for column in found]
    told = {role: _told_place(plain, role, column, found, source) for role, column in options.columns.items()}
    roles = [role for role in ROLES if not (role == "series" and options.series is not None)]
    taken = set(told.values())
    result: dict[str, int | None] = dict.fromkeys(ROLES)
    for role in roles:
        result[role] = told[role] if role in told else _usual_place(plain, role, taken, found, source)
    return result


def has_bars(place: Mapping[str, int | None]) -> bool:
    """Whether a source has any column for open, high, low or volume."""
    return any(place[role] is not None for role in BAR_ROLES)


def _plain(column: str) -> str:
    return column.strip().casefold().replace(" ", "_").replace("-", "_")


def _told_place(plain: Sequence[str], role: str, column: str, found: Sequence[str], source: str) -> int:
    matches = [place for place, name in enumerate(plain) if name == _plain(column)]
    if len(matches) != 1:
        how = "no column" if not matches else "more than one column"
        raise IntakeError(
            f"{source} has {how} {column!r}, which --columns {role}={column} names; it has {_listed(found)}."
        )
    return matches[0]


def _usual_place(plain: Sequence[str], role: str, taken: set[int], found: Sequence[str], source: str) -> int | None:
    matches = [place for place, name in enumerate(plain) if name in USUAL_NAMES[role] and place not in taken]
    if len(matches) > 1:
        both = " and ".join(repr(found[place]) for place in matches)
        raise IntakeError(
            f"{source} has several columns for the {role}: {both}; say which with --columns {role}={found[matches[0]]}."
        )
    if not matches and role in _NEEDED:
        or_series = " or --series NAME" if role == "series" else ""
        raise IntakeError(
            f"{source} has no column for the {role}; it has {_listed(found)}; "
            f"say which with --columns {role}=NAME{or_series}."
        )
    return matches[0] if matches else None


def _listed(found: Sequence[str]) -> str:
    return "no columns" if not found else "the columns " + ", ".join(repr(column) for column in found)
