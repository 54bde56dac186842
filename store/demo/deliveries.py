"""The files that the island's desk gets: a history, three mornings with a little dirt, and two corrections."""

from __future__ import annotations

from datetime import date, timedelta
from pathlib import Path

import numpy as np

from driftbook.estimators.simulate import simulate_ou

_SEED = 20260630
_FIRST_DAY = date(2024, 1, 2)
_MORNINGS = (date(2026, 6, 25), date(2026, 6, 26), date(2026, 6, 29))
# name: decimals, and what the series is made of: kappa (1/yr), theta, sigma (per √yr), first value
_SERIES = {
    "pellets_fob": (2, (5.0, 182.0, 48.0, 171.0)),
    "power_da": (2, (55.0, 64.0, 330.0, 80.0)),
    "crown_eur": (4, (0.9, 7.45, 0.11, 7.52)),
}
_STEP = 1 / 252
# A keying error of the first delivery: the comma in the wrong place.
_MISKEYED = ("pellets_fob", date(2026, 6, 11), 10.0)

Row = tuple[str, date, str]


def write_deliveries(inbox: Path) -> list[Path]:
    """Writes the files in the order in which they came; the last one waits in the inbox for the reader."""
    inbox.mkdir(parents=True)
    true = _true_rows()
    history = [_miskeyed(row) for row in true if row[1] < _MORNINGS[0]]
    files = [_write(inbox / "history.csv", history)]
    files += [_write(inbox / f"{day.isoformat()}.csv", [row for row in true if row[1] == day]) for day in _MORNINGS]
    _dirty(files[-1], true)
    corrected = [row for row in true if row[0] == _MISKEYED[0] and row[1] == _MISKEYED[1]]
    files.append(_write(inbox / "pellets_corrected.csv", corrected))
    files.append(_write(inbox / "power_corrected.csv", _late_settlement(true)))
    return files


def _true_rows() -> list[Row]:
    days = _weekdays()
    rng = np.random.default_rng(_SEED)
    rows: list[Row] = []
    for name, (decimals, (kappa, theta, sigma, start)) in _SERIES.items():
        path = simulate_ou(rng, kappa=kappa, theta=theta, sigma=sigma, dt=_STEP, steps=len(days) - 1, start=start)[0]
        rows.extend((name, day, f"{value:.{decimals}f}") for day, value in zip(days, path, strict=True))
    return rows


def _weekdays() -> list[date]:
    count = (_MORNINGS[-1] - _FIRST_DAY).days + 1
    return [day for day in (_FIRST_DAY + timedelta(n) for n in range(count)) if day.weekday() < 5]


def _miskeyed(row: Row) -> Row:
    name, day, text = row
    return (name, day, f"{float(text) / _MISKEYED[2]:.2f}") if (name, day) == _MISKEYED[:2] else row


def _late_settlement(true: list[Row]) -> list[Row]:
    settled = [row for row in true if row[:2] == ("power_da", _MORNINGS[0])]
    return [(name, day, f"{float(text) + 41:.2f}") for name, day, text in settled]


def _write(path: Path, rows: list[Row]) -> Path:
    lines = ["series,time,value", *(f"{name},{day.isoformat()},{text}" for name, day, text in rows)]
    path.write_text("\n".join(lines) + "\n", encoding="utf-8")
    return path


def _dirty(path: Path, true: list[Row]) -> None:
    """What a tired hand adds: a repeated row, a name that the book does not know, a value that is none."""
    again = next(row for row in true if row[:2] == ("power_da", _MORNINGS[1]))
    with path.open("a", encoding="utf-8") as file:
        file.write(f"{again[0]},{again[1].isoformat()},{again[2]}\n")
        file.write("PEL FOB,2026-06-29,181.20\n")
        file.write("crown_eur,2026-06-29,n/a\n")
