"""The guide: its links lead somewhere, its pictures are what driftbook draws, its tables are what the code says."""

import re

import pytest
from documents import ROOT

from driftbook.estimators.status import Status
from driftbook.store.guide import pictures, reference

GUIDE = ROOT / "store" / "guide"
PAGES = sorted(GUIDE.glob("*.md"))
PATHS = re.compile(r' d="([^"]+)"')


@pytest.mark.parametrize("page", PAGES, ids=lambda path: path.name)
def test_every_link_between_pages_leads_somewhere(page):
    for target in re.findall(r"\]\(([^)#]+)\)", page.read_text(encoding="utf-8")):
        assert (GUIDE / target).is_file(), target


def test_every_page_is_reached_from_the_readme():
    seen, waiting = set(), [ROOT / "README.md"]
    while waiting:
        page = waiting.pop()
        linked = re.findall(r"\]\(([^)#]+\.md)\)", page.read_text(encoding="utf-8"))
        new = {(page.parent / target).resolve() for target in linked} - seen
        seen |= new
        waiting += new
    assert set(PAGES) <= seen


def test_the_pictures_are_what_driftbook_draws(island):
    """Shapes only: where letters come to lie depends on the fonts of the machine."""
    names = set()
    for name, svg in pictures.drawn(island / "island.duckdb"):
        kept = (pictures.FOLDER / f"{name}.svg").read_text(encoding="utf-8")
        assert PATHS.findall(svg) == PATHS.findall(kept), name
        names.add(f"{name}.svg")
    assert names == {path.name for path in pictures.FOLDER.iterdir()}


def test_every_status_is_explained():
    text = (GUIDE / "statistics.md").read_text(encoding="utf-8")
    for status in Status:
        assert f"| `{status.word}` | {status.sentence} |" in text


def test_the_reference_is_what_the_dictionary_says():
    assert (GUIDE / "reference.md").read_text(encoding="utf-8") == reference.page()
