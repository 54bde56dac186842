"""The application: a list of routes over one book, with no state but its path."""

from __future__ import annotations

from pathlib import Path

from starlette.applications import Starlette
from starlette.exceptions import HTTPException
from starlette.middleware import Middleware
from starlette.routing import Mount, Route
from starlette.staticfiles import StaticFiles

from driftbook.store.errors import BookError
from driftbook.store.page import answers
from driftbook.store.page.guard import Guard

STATIC = Path(__file__).parent / "static"


def create_app(book: Path) -> Starlette:
    """The page of a book, which is opened again for every answer and so follows its swaps."""
    app = Starlette(
        routes=[
            Route("/", answers.first_sheet),
            Route("/series", answers.series_sheet),
            Route("/guide", answers.guide_list),
            Route("/guide/{name}.md", answers.guide_page),
            Mount("/guide/pictures", StaticFiles(packages=[("driftbook.store.guide", "pictures")])),
            Route("/newest.json", answers.newest),
            Route("/csv/{kind}.csv", answers.csv_file),
            Mount("/static", StaticFiles(directory=STATIC)),
        ],
        middleware=[Middleware(Guard)],
        exception_handlers={BookError: answers.sorry, HTTPException: answers.sorry},
    )
    app.state.book = book
    return app
