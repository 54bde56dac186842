"""The files that the island's desk gets: four histories, three mornings with a little dirt, and two corrections."""

from __future__ import annotations

from collections.abc import Iterator
from dataclasses import dataclass
from datetime import date, timedelta
from pathlib import Path

import numpy as np

from driftbook.estimators.simulate import simulate_ou

_SEED = 20260630
_FIRST_DAY, _LAST_DAY = date(2023, 6, 26), date(2026, 6, 29)
# A keying error of the first morning: the comma in the wrong place. And a settlement that came late.
_MISKEYED, _SLIP = ("pellets_fob", date(2026, 6, 11)), 10.0
_SETTLED, _SURCHARGE = ("power_da", date(2026, 6, 25)), 41.0
# The days on which the island's currency was pegged anew, and to what.
_PEGS = {date(2023, 6, 26): 7.45, date(2024, 5, 13): 7.72, date(2025, 11, 3): 7.60}

Row = tuple[str, date, str]


@dataclass(frozen=True)
class Made:
    """How a series is made up: an Ornstein–Uhlenbeck path of its level, or of its logarithm."""

    decimals: int
    kappa: float
    theta: float
    sigma: float
    is_log: bool = False


_SERIES = {
    "pellets_fob": Made(2, 6.0, np.log(178.0), 0.24, is_log=True),
    "diesel": Made(2, 0.0, np.log(795.0), 0.31, is_log=True),
    "freight": Made(2, 9.0, np.log(23.0), 0.52, is_log=True),
    "carbon_permit": Made(2, 0.0, np.log(68.0), 0.36, is_log=True),
    "power_da": Made(2, 55.0, 66.0, 380.0),
    "spark": Made(2, 14.0, 6.5, 46.0),
    "crown_eur": Made(4, 30.0, 0.0, 0.05),
    "overnight": Made(3, 0.4, 2.4, 0.45),
    "reservoir": Made(2, 3.0, 41.0, 3.6),
}


@dataclass(frozen=True)
class Delivery:
    """One morning's file, and when the desk took it in, told."""

    name: str
    told: str
    rows: list[Row]
    dirt: str = ""

    def put_into(self, inbox: Path) -> None:
        """Writes the file."""
        lines = ["series,time,value", *(f"{name},{day.isoformat()},{text}" for name, day, text in self.rows)]
        (inbox / self.name).write_text("\n".join(lines) + "\n" + self.dirt, encoding="utf-8")


def deliveries() -> Iterator[Delivery]:
    """What comes in, in its order; the last waits in the inbox for the reader."""
    true = _true_rows()
    bounds = [(date(2023, 6, 26), date(2023, 12, 31)), (date(2024, 1, 1), date(2024, 12, 31)),
              (date(2025, 1, 1), date(2025, 12, 31)), (date(2026, 1, 1), date(2026, 6, 24))]  # fmt: skip
    for first, last in bounds:
        rows = [_miskeyed(row) for row in true if first <= row[1] <= last]
        told = "2026-06-25T05:30Z" if last.month == 6 else f"{last.year + 1}-01-02T05:30Z"
        yield Delivery(f"history_{last.year}.csv", told, rows)
    for day, told in ((25, "2026-06-26T05:30Z"), (26, "2026-06-29T05:30Z")):
        rows = [row for row in true if row[1] == date(2026, 6, day)]
        yield Delivery(f"market_2026-06-{day}.csv", told, rows)
    yield Delivery("market_2026-06-29.csv", "2026-06-30T05:30Z", _last_morning(true), _dirt(true))
    yield Delivery("pellets_corrected.csv", "2026-06-30T11:00Z", [row for row in true if row[:2] == _MISKEYED])
    yield Delivery("power_corrected.csv", "2026-07-01T05:30Z", [_settled(row) for row in true if row[:2] == _SETTLED])


def _true_rows() -> list[Row]:
    rng = np.random.default_rng(_SEED)
    rows: list[Row] = []
    for name, made in _SERIES.items():
        days = _days(weekends=name == "reservoir")
        path = simulate_ou(
            rng,
            kappa=made.kappa,
            theta=made.theta,
            sigma=made.sigma,
            dt=1 / 365 if name == "reservoir" else 1 / 252,
            steps=len(days) - 1,
            start=made.theta,
        )[0]
        values = np.exp(path) if made.is_log else path
        if name == "crown_eur":
            values = values + np.array([_peg(day) for day in days])
        rows.extend((name, day, f"{value:.{made.decimals}f}") for day, value in zip(days, values, strict=True))
    return rows


def _days(*, weekends: bool) -> list[date]:
    count = (_LAST_DAY - _FIRST_DAY).days + 1
    return [day for day in (_FIRST_DAY + timedelta(n) for n in range(count)) if weekends or day.weekday() < 5]


def _peg(day: date) -> float:
    return [level for since, level in _PEGS.items() if since <= day][-1]


def _miskeyed(row: Row) -> Row:
    return (*row[:2], f"{float(row[2]) / _SLIP:.2f}") if row[:2] == _MISKEYED else row


def _settled(row: Row) -> Row:
    return (*row[:2], f"{float(row[2]) + _SURCHARGE:.2f}")


def _last_morning(true: list[Row]) -> list[Row]:
    """The last day's rows, without those that a tired hand got wrong."""
    return [row for row in true if row[1] == _LAST_DAY and row[0] not in ("pellets_fob", "overnight")]


def _dirt(true: list[Row]) -> str:
    """A repeated row, a name that only the plan explains, a name that nobody knows, a value that is none."""
    again = next(row for row in true if row[:2] == ("power_da", date(2026, 6, 26)))
    pellets = next(row for row in true if row[:2] == ("pellets_fob", _LAST_DAY))
    return (
        f"{again[0]},{again[1].isoformat()},{again[2]}\n"
        f"PEL FOB,2026-06-29,{pellets[2]}\n"
        "lubricants,2026-06-29,1410.00\n"
        "overnight,2026-06-29,n/a\n"
    )
