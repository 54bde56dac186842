"""The guide that comes with the package, as HTML: its links between pages work as they stand."""

from __future__ import annotations

from dataclasses import dataclass
from functools import cache
from importlib.resources import files

from markdown_it import MarkdownIt
from markupsafe import Markup

from driftbook.store import guide


@dataclass(frozen=True)
class Page:
    """One page: the name of its file without the ending, its title and its text as HTML."""

    name: str
    title: str
    html: Markup


@cache
def pages() -> list[Page]:
    """All pages, in the order of their titles."""
    texts = {entry.name.removesuffix(".md"): entry.read_text(encoding="utf-8") for entry in files(guide).iterdir()
             if entry.name.endswith(".md")}  # fmt: skip
    return sorted((_page(name, text) for name, text in texts.items()), key=lambda one: one.title.lower())


def page(name: str) -> Page | None:
    """A page by its name; None if there is none."""
    return next((one for one in pages() if one.name == name), None)


def _page(name: str, text: str) -> Page:
    first, _, _ = text.partition("\n")
    title = first.removeprefix("# ").strip()
    # the guide is our own text, and HTML in it would come out as text
    return Page(name, title, Markup(_within_reach(_writer().render(text))))  # noqa: S704


def _within_reach(html: str) -> str:
    """Lets the keyboard scroll what is wider than the page."""
    html = html.replace("<pre>", '<pre tabindex="0">')
    return html.replace("<table>", '<div class="wide" tabindex="0"><table>').replace("</table>", "</table></div>")


@cache
def _writer() -> MarkdownIt:
    return MarkdownIt("commonmark", {"html": False}).enable("table")
