"""Which model: one thin row per model, ink by its weight on each window."""

from __future__ import annotations

from dataclasses import dataclass
from datetime import datetime
from typing import Any

import altair as alt
import polars as pl

from driftbook.estimators import MODELS
from driftbook.store.charts.style import Palette, along, milliseconds, on_paper
from driftbook.store.charts.tables import as_rows, models_table
from driftbook.store.known import Known
from driftbook.store.words import model as in_words

_ROW, _INK = 38, 13
_MOST_CELLS = 120
_OVERLAP = 0.6  # pixels that a cell reaches into the next, so that no paper shines through


@dataclass(frozen=True)
class Weights:
    """The weight of each model by the ends of the windows; None where it was not used."""

    ends: list[datetime]
    by_model: dict[str, dict[datetime, float | None]]

    @property
    def summary(self) -> str:
        """The chart in words."""
        now = [f"{in_words(name)} ({name}) {last_weight(self, name)}" for name in self.by_model]
        return f"Weights of {len(now)} models over {len(self.ends)} windows; now {', '.join(now)}."


def weights(book: Known, row: dict[str, Any]) -> Weights | None:
    """Reads the weights of the models of a series; None if none was fitted."""
    rows = as_rows(models_table(book, row))
    if not rows:
        return None
    names = [name for name in MODELS if any(one["model"] == name for one in rows)]
    return Weights(
        sorted({one["window_end"] for one in rows}),
        {name: {one["window_end"]: one["model_weight"] for one in rows if one["model"] == name} for name in names},
    )


def last_weight(found: Weights, name: str) -> str:
    """A model's weight on the last window."""
    weight = found.by_model[name].get(found.ends[-1])
    return "not used" if weight is None else f"{weight:.2f}"


def draw(shown: Weights, palette: Palette) -> alt.LayerChart:
    """The chart, with each model's name in words above its row."""
    x = along(shown.ends[0], shown.ends[-1], grid=False)
    rows = alt.Y("model:N", sort=list(shown.by_model), axis=None)
    names = pl.DataFrame(
        {
            "model": list(shown.by_model),
            "text": [f"{in_words(name)} ({name}), now {last_weight(shown, name)}" for name in shown.by_model],
        }
    )
    cells = pl.DataFrame(
        [(*cell, palette.inked(cell[-1])) for cell in _cells(shown)],
        ["model", "time", "until", "weight", "ink"],
        orient="row",
    )
    below = _ROW / 2 - _INK / 2 - 2
    bars = alt.Chart(cells).mark_bar(height=_INK, yOffset=below, x2Offset=_OVERLAP)
    words = alt.Chart(names).mark_text(color=palette.ink, align="left", baseline="bottom", dy=2, fontSize=13)
    layers = [
        bars.encode(x, rows, x2="until:T", color=alt.Color("ink:N", scale=None)),
        words.encode(rows, text="text:N", x=alt.value(0)),
    ]
    return on_paper(layers, palette, _ROW * len(shown.by_model), shown.summary, left=0)


def _cells(shown: Weights) -> list[tuple[str, int, int, float]]:
    """At most 120 cells a model, each from a window to the next, with the mean weight there."""
    ends, count = shown.ends, min(_MOST_CELLS, len(shown.ends))
    found = []
    for name, weight in shown.by_model.items():
        for at in range(count):
            start, stop = at * len(ends) // count, (at + 1) * len(ends) // count
            there = [weight.get(end) or 0.0 for end in ends[start:stop]]
            until = ends[min(stop, len(ends) - 1)]
            found.append((name, milliseconds(ends[start]), milliseconds(until), sum(there) / len(there)))
    return found
