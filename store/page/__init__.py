"""The page: a book shown in the browser, read-only; a leaf that nothing imports but the command line."""

from driftbook.store.page.app import create_app

__all__ = ["create_app"]
