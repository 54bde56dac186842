"""Books to look at: one with a failed fit and a hostile name, one with a thousand series."""

from datetime import datetime, timedelta
from pathlib import Path

import numpy as np
import polars as pl
from made_series import days, wave

from driftbook import store
from driftbook.store.swap import create

HOSTILE = """'=1+1"><script>alert(1)</script>&../%2F?#🜁‮x"""


def quoted(name: str) -> str:
    """A name as TOML text."""
    return '"' + name.replace("\\", "\\\\").replace('"', '\\"') + '"'


def small_book(path: Path) -> Path:
    """Three series in two runs: a price, a hostile name, and one that never moves and so has no fit."""
    create(path)
    names = {"power_da": wave(40, 60.0), HOSTILE: wave(40), "peg": [7.5] * 40}
    plan = 'name = "desk"\n' + "".join(
        f'[[series]]\nname = {quoted(name)}\nsign = "positive"\nunit = "EUR/t"\n' for name in reversed(names)
    )
    plan += '[[estimate]]\nseries = ["*"]\nmodels = ["gbm", "ou"]\nlookbacks = [20]\n'
    (path.parent / "plan.toml").write_text(plan, encoding="utf-8")
    with store.writing(path, at="2024-03-01T08:00") as work:
        for name, values in names.items():
            work.ingest(days(name, values), store.Options(add_series=True), name=f"first {name}")
        work.refresh(path.parent / "plan.toml")
    correct(path, at="2024-03-02T08:00")
    return path


def correct(path: Path, at: str | None = None, to: float = 99.0) -> None:
    """One more run, which corrects a value of power_da."""
    with store.writing(path, at=at) as work:
        work.ingest(days("power_da", [to], 30), name=f"corrected to {to}")
        work.refresh()


def thousand_series(path: Path) -> Path:
    """A thousand series with a year of weekdays and a morning, each with a window."""
    count, length = 1000, 262
    rng = np.random.default_rng(20260630)
    values = 100 * np.exp(np.cumsum(rng.normal(0, 0.02, (count, length)), axis=1))
    end = datetime(2026, 6, 29)
    back = (end - timedelta(days=days) for days in range(2 * length))
    times = sorted([day for day in back if day.weekday() < 5][:length])
    names = [f"series_{number:04d}" for number in range(count)]
    frame = pl.DataFrame(
        {"series": np.repeat(names, length), "time": times * count, "value": values.round(2).ravel()},
        schema_overrides={"time": pl.Datetime("us")},
    )
    create(path)
    plan = 'name = "many"\n' + "".join(
        f'[[series]]\nname = "{name}"\nsign = "positive"\nunit = "EUR/t"\n' for name in names
    )
    plan += '[[estimate]]\nseries = ["*"]\nmodels = ["gbm", "ou"]\nlookbacks = [250]\nevery = "month"\n'
    (path.parent / "many.toml").write_text(plan, encoding="utf-8")
    for moment, rows in (("2026-06-29T05:00", pl.col("time") < end), ("2026-06-30T05:00", pl.col("time") == end)):
        with store.writing(path, at=moment) as work:
            work.ingest(frame.filter(rows), store.Options(add_series=True), name=moment)
            work.refresh(path.parent / "many.toml")
    return path
