"""The book: everything that touches the DuckDB file.

connect
    A read-only connection with the book's views, macros and functions.
writing
    One block, one run: take in, estimate, swap.
verify
    Proof that the book is whole.
create
    An empty book.
"""

from __future__ import annotations

import sys
from importlib import import_module
from types import ModuleType
from typing import TYPE_CHECKING, Any

if TYPE_CHECKING:
    from driftbook.store.connect import connect
    from driftbook.store.errors import (
        BookError,
        BookLocked,
        DifferenceFound,
        IntakeError,
        PlanError,
        UsageError,
    )
    from driftbook.store.intake import Options, Outcome
    from driftbook.store.swap import create
    from driftbook.store.verify import verify
    from driftbook.store.writing import Writing, writing

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
    "connect",
    "create",
    "verify",
    "writing",
]

# Loaded on first use, so that a command pays only for what it needs.
_HOME = {
    "connect": "connect",
    "create": "swap",
    "verify": "verify",
    "writing": "writing",
    "Writing": "writing",
    "Options": "intake",
    "Outcome": "intake",
}


def __getattr__(name: str) -> Any:
    if name not in __all__:
        raise AttributeError(f"driftbook.store has no {name!r}")
    return getattr(import_module(f"driftbook.store.{_HOME.get(name, 'errors')}"), name)


class _Contents(ModuleType):
    """The package, whose names stay what `__all__` says when a submodule of the same name is imported."""

    def __setattr__(self, name: str, value: Any) -> None:
        """Binds the function instead of the submodule that the import machinery wants to bind."""
        super().__setattr__(name, getattr(value, name) if name in _HOME and isinstance(value, ModuleType) else value)


sys.modules[__name__].__class__ = _Contents
