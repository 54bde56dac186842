"""The templates, with what all of them know."""

from __future__ import annotations

import shlex
from functools import cache
from typing import Any

from jinja2 import Environment, PackageLoader, StrictUndefined

from driftbook.store import words
from driftbook.store.known import Known
from driftbook.store.page import whiskers
from driftbook.store.page.links import Links
from driftbook.store.table import count_of

CAUTION = (
    "Statistical estimates from past data: no advice and no forecast of returns. Limits, margin and capital rules are "
    "those of your regulator and of your firm's own licensed or validated practice."
)


@cache
def _environment() -> Environment:
    made = Environment(
        loader=PackageLoader(__package__),
        autoescape=True,
        undefined=StrictUndefined,
        trim_blocks=True,
        lstrip_blocks=True,
    )
    made.globals.update(words=words, count_of=count_of, ticks=whiskers.ticks, caution=CAUTION)
    made.filters["shell"] = shlex.quote
    return made


def render(template: str, book: Known | None, links: Links, **told: Any) -> str:
    """One template as HTML."""
    past = words.as_known(book.as_of) if book and book.as_of else None
    return _environment().get_template(template).render(book=book, links=links, past=past, **told)
