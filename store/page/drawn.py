"""Charts as pictures inside the page: drawn here, by the JavaScript that its Python package brings along."""

from __future__ import annotations

import re
from dataclasses import dataclass
from typing import Any

import altair as alt
import polars as pl
import vl_convert
from markupsafe import Markup, escape

from driftbook.store.charts.style import WIDTH, Palette, on_paper

# A browser fills these in from the style sheet, which knows light and dark, paper and the tint of the past.
PAPER = Palette(
    ink="var(--ink)",
    soft="var(--soft)",
    rule="var(--rule)",
    shade="var(--shade)",
    band="var(--band)",
    paper="transparent",
    letters="inherit",
)
# How much narrower than the chart itself; the style sheet shows the one that the window has room for.
_NARROWER = {"wide": 0, "narrow": WIDTH - 340}
_OPENING = re.compile(r"<svg[^>]*>")
_NAMES = re.compile(r'(id="|url\(#)')
_SPOKEN = re.compile(r' (?:role|aria-[a-z]+)="[^"]*"')  # the whole picture is one image with one text


@dataclass(frozen=True)
class Picture:
    """A chart in each width, and what it shows in words."""

    summary: str
    svg: Markup


def drawn(chart: alt.LayerChart, place: str, summary: str) -> Picture:
    """Draws a chart; `place` is a word that no other picture of the page has."""
    told = chart.to_dict(validate=False)
    return Picture(summary, Markup("").join(_svg(told, place, kind, summary) for kind in _NARROWER))


def warm_up() -> None:
    """Draws something, so that the first reader need not wait for the drawing to be loaded."""
    drawn(
        on_paper([alt.Chart(pl.DataFrame({"value": [1.0]})).mark_rule().encode(x="value:Q")], PAPER, 1, ""), "warm", ""
    )


def _svg(told: dict[str, Any], place: str, kind: str, summary: str) -> Markup:
    text = vl_convert.vegalite_to_svg({**told, "width": told["width"] - _NARROWER[kind]}, allowed_base_urls=[])
    named = _NAMES.sub(rf"\g<1>{place}-{kind}-", _SPOKEN.sub("", text))
    size = re.search(r'viewBox="[^"]*"', text)
    opening = f'<svg class="chart {kind}" {size[0] if size else ""} role="img" aria-label="{escape(summary)}">'
    # what names in the book say was escaped by the drawing
    return Markup(_OPENING.sub(lambda _: opening, named, count=1))  # noqa: S704
