"""The pictures of the guide, drawn from the demo's book: `python -m driftbook.store.guide.pictures` writes them."""

from __future__ import annotations

import tempfile
from collections.abc import Iterator
from pathlib import Path

import vl_convert

from driftbook.store import charts
from driftbook.store.demo import run_demo
from driftbook.store.reader import connect

FOLDER = Path(__file__).parent / "pictures"


def drawn(book: Path) -> Iterator[tuple[str, str]]:
    """Each picture's name and its SVG."""
    with connect(book) as con:
        pictures = {
            "values": charts.values(con, "power_da", level=50.0),
            "volatility": charts.said(con, "power_da"),
            "half_life": charts.said(con, "power_da", "half_life"),
            "models": charts.models(con, "spark"),
        }
        for name, chart in pictures.items():
            yield name, vl_convert.vegalite_to_svg(chart.to_json())


def _draw_all() -> None:
    with tempfile.TemporaryDirectory() as folder:
        run_demo(Path(folder) / "island", lambda _: None, lambda _: "", lambda _: "")
        for name, svg in drawn(Path(folder) / "island" / "island.duckdb"):
            (FOLDER / f"{name}.svg").write_text(svg, encoding="utf-8")


if __name__ == "__main__":
    _draw_all()
