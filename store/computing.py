"""Due slices computed: what a refresh writes, and what `reproduce` computes again."""

from __future__ import annotations

from collections.abc import Iterable, Mapping
from concurrent.futures import Executor

import numpy as np
import pyarrow as pa
from numpy.typing import NDArray

from driftbook.estimators import Model
from driftbook.store.clocks import equal_step, microseconds_per_unit
from driftbook.store.due import Slice
from driftbook.store.for_model import ForModel, Settings, for_model
from driftbook.store.functions import Stretch, rolled
from driftbook.store.model_schema import stored_columns
from driftbook.store.observed import Observed
from driftbook.store.series import Series, Setting


def computed(
    model: Model,
    slices: list[Slice],
    known: Observed,
    series: Mapping[int, Series],
    fixed: Settings,
    executor: Executor,
) -> pa.Table:
    """One row for each window of some slices: its series, lookback and times, and what the model says of it.

    `fixed` are the model's settings of each series and lookback.
    A slice begins where its blocks begin, and windows before the first due one are passed over. A series shorter than
    its lookback has one window, which says so.
    """
    settings = {series_id: one.setting for series_id, one in series.items()}
    begins = _integers(known.place(one.series_id).start for one in slices)
    firsts = begins + _integers(one.first for one in slices)
    stops = begins + _integers(one.stop + 1 for one in slices)
    stretches = (
        _stretch(
            one, known, settings[one.series_id], for_model(model, settings[one.series_id], fixed.get(one.entry, ()))
        )
        for one in slices
    )
    counts, fits = rolled(model, executor, stretches)
    nth = np.arange(len(fits)) - np.repeat(np.cumsum(counts) - counts, counts)
    starts, ends = np.repeat(firsts, counts) + nth, np.repeat(stops - counts, counts) + nth
    columns = {
        "series_id": np.repeat(_integers(one.series_id for one in slices), counts).astype(np.int32),
        "lookback": np.repeat(_integers(one.lookback for one in slices), counts).astype(np.int32),
        "window_start": known.us[starts].view("datetime64[us]"),
        "window_end": known.us[ends].view("datetime64[us]"),
    }
    told = {name: fits.field(name) for name in ("n", *(name for name, _ in stored_columns(model)), "status")}
    found = pa.table({**columns, **told})
    return found.filter(_wanted(slices, counts)) if any(one.ends is not None for one in slices) else found


def _stretch(one: Slice, known: Observed, setting: Setting, taken: ForModel) -> Stretch:
    """What of a series one slice needs, as the model takes it."""
    begin = known.place(one.series_id).start
    here = slice(begin + one.start, begin + one.stop + 1)
    step = equal_step(setting.clock, setting.periods_per_year)
    steps = np.array([step]) if step else np.diff(known.us[here]) / microseconds_per_unit(setting.clock)
    x = known.values[here]
    return Stretch(
        x + taken.shift if taken.shift else x, steps, one.steps, one.first - one.start, taken.settings, taken.on_logs
    )


def _integers(values: Iterable[int]) -> NDArray[np.int64]:
    return np.fromiter(values, np.int64)


def _wanted(slices: list[Slice], counts: NDArray[np.int64]) -> NDArray[np.bool_]:
    """Which windows end where a day, week or month does."""
    wanted = [
        np.ones(count, np.bool_) if one.ends is None else np.isin(np.arange(count) + one.first + one.steps, one.ends)
        for one, count in zip(slices, counts.tolist(), strict=True)
    ]
    return np.concatenate(wanted)
