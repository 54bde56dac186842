"""One self-contained file to mail: the first sheet and the series' sheets, with style, script and data inside."""

from __future__ import annotations

from dataclasses import dataclass
from pathlib import Path
from typing import Any

from driftbook.store.known import Known, known
from driftbook.store.page.answers import runs
from driftbook.store.page.app import STATIC
from driftbook.store.page.data import csv_of
from driftbook.store.page.links import Mailed
from driftbook.store.page.overview import Overview, overview
from driftbook.store.page.rendering import render
from driftbook.store.page.sheet import Asked, sheet

_MOST_SHEETS = 20  # each about half a megabyte, and what is to be mailed has to stay below 25


@dataclass(frozen=True)
class Inside:
    """What stands in the file instead of beside it."""

    style: str
    script: str


def write_file(book: Path, output: Path, as_of: str | None = None) -> None:
    """Writes the page as one file, whole or not at all."""
    with known(book, as_of) as there:
        text = mailed_page(there, book)
    unfinished = output.with_name(f".{output.name}.part")
    unfinished.write_text(text, encoding="utf-8")
    unfinished.replace(output)


def mailed_page(there: Known, book: Path) -> str:
    """The file's text."""
    found = overview(there)
    chosen = _chosen(found)
    links = Mailed(chosen, lambda kind, series: csv_of(there, kind, series))
    inside = Inside(_static("page.css"), _static("page.js"))
    sheets = [sheet(there, series, Asked(), f"sheet-{at}") for at, series in enumerate(chosen)]
    left = len(found.lines) - len(chosen)
    told: dict[str, Any] = {"sheet": found, "runs": runs(there), "sheets": sheets, "left": left, "path": book.name}
    return render("mailed.html", there, links, mailed=inside, **told)


def _chosen(found: Overview) -> list[str]:
    """All series; of very many, those to look at."""
    lines = found.lines
    if len(lines) > _MOST_SHEETS:
        lines = [line for line in lines if line.needs_a_look][:_MOST_SHEETS]
    return [line.series for line in lines]


def _static(name: str) -> str:
    return (STATIC / name).read_text(encoding="utf-8")
