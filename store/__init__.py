"""The book: everything that touches the DuckDB file.

connect
    A read-only connection with the book's views, macros and functions.
writing
    One block, one run: take in, estimate, swap.
verify
    Proof that the book is whole.
create
    An empty book.
charts
    The page's charts as altair objects; they need the extra `page`.
"""

from __future__ import annotations

from importlib import import_module
from typing import TYPE_CHECKING, Any

if TYPE_CHECKING:
    from driftbook.store import charts
    from driftbook.store.errors import (
        BookError,
        BookLocked,
        DifferenceFound,
        IntakeError,
        PlanError,
        UsageError,
    )
    from driftbook.store.intake import Options, Outcome
    from driftbook.store.proof import verify
    from driftbook.store.reader import connect
    from driftbook.store.swap import create
    from driftbook.store.writer import Writing, writing

__all__ = [
    "BookError",
    "BookLocked",
    "DifferenceFound",
    "IntakeError",
    "Options",
    "Outcome",
    "PlanError",
    "UsageError",
    "Writing",
    "charts",
    "connect",
    "create",
    "verify",
    "writing",
]

# Loaded on first use, so that a command pays only for what it needs.
_HOME = {
    "connect": "reader",
    "create": "swap",
    "verify": "proof",
    "writing": "writer",
    "Writing": "writer",
    "Options": "intake",
    "Outcome": "intake",
}


def __getattr__(name: str) -> Any:
    if name not in __all__:
        raise AttributeError(f"driftbook.store has no {name!r}")
    if name == "charts":
        return import_module("driftbook.store.charts")
    return getattr(import_module(f"driftbook.store.{_HOME.get(name, 'errors')}"), name)
