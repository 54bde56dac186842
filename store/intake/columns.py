"""Which column of a source plays which role."""

from __future__ import annotations

from collections.abc import Mapping, Sequence

from driftbook.store.errors import IntakeError
from driftbook.store.intake.numerals import read_number
from driftbook.store.intake.options import BAR_ROLES, ROLES, Options
from driftbook.store.intake.reasons import Reason
from driftbook.store.intake.times import read_time

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
_SHOWN = 20


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


def time_place(found: Sequence[str], options: Options, source: str) -> int:
    """The place of the time's column, where each other column is a series."""
    plain = [_plain(column) for column in found]
    if "time" in options.columns:
        return _told_place(plain, "time", options.columns["time"], found, source)
    place = _usual_place(plain, "time", set(), found, source)
    assert place is not None  # noqa: S101 - time is needed, and a source without it was refused
    return place


def _told_place(plain: Sequence[str], role: str, column: str, found: Sequence[str], source: str) -> int:
    matches = [place for place, name in enumerate(plain) if name == _plain(column)]
    if len(matches) > 1:
        raise IntakeError(
            f"{source} has {len(matches)} columns {column!r}, which --columns {role}={column} names; "
            "rename all but one."
        )
    if not matches:
        _check_header(found, source)
        raise IntakeError(
            f"{source} has no column {column!r}, which --columns {role}={column} names; it has {_listed(found)}."
        )
    return matches[0]


def _usual_place(plain: Sequence[str], role: str, taken: set[int], found: Sequence[str], source: str) -> int | None:
    matches = [place for place, name in enumerate(plain) if name in USUAL_NAMES[role] and place not in taken]
    if len(matches) > 1:
        _refuse_several(role, [found[place] for place in matches], source)
    if not matches and role in _NEEDED:
        _check_header(found, source)
        or_series = " or --series NAME" if role == "series" else ""
        raise IntakeError(
            f"{source} has no column for the {role}; it has {_listed(found)}; "
            f"say which with --columns {role}=NAME{or_series}."
        )
    return matches[0] if matches else None


def _refuse_several(role: str, names: Sequence[str], source: str) -> None:
    both = " and ".join(map(repr, names))
    if len(set(map(_plain, names))) == 1:
        raise IntakeError(f"{source} has several columns of one name, {both}; rename all but one.")
    distinct = names[0] if [_plain(name) for name in names].count(_plain(names[0])) == 1 else names[-1]
    raise IntakeError(
        f"{source} has several columns for the {role}: {both}; say which with --columns {role}={distinct}."
    )


def _check_header(found: Sequence[str], source: str) -> None:
    """A first line that holds a time or a number is a row and no header."""
    for text in found:
        if isinstance(read_number(text), float) or not isinstance(read_time(text, "UTC", None), Reason):
            raise IntakeError(
                f"{source} has no header: {text!r} stands where the columns' names should; "
                "put a line like series,time,value above the rows."
            )


def _listed(found: Sequence[str]) -> str:
    """The columns in words, those of a wide table not all."""
    shown = ", ".join(repr(column) for column in found[:_SHOWN])
    more = f" and {len(found) - _SHOWN} more" if len(found) > _SHOWN else ""
    return f"the columns {shown}{more}" if found else "no columns"
