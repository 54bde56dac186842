"""What is answered to each address."""

from __future__ import annotations

from pathlib import Path

from starlette.exceptions import HTTPException
from starlette.requests import Request
from starlette.responses import HTMLResponse, JSONResponse, Response

from driftbook.store.errors import BookLocked, UsageError
from driftbook.store.known import Known, known
from driftbook.store.page import guide
from driftbook.store.page.data import csv_of
from driftbook.store.page.links import Served
from driftbook.store.page.overview import overview
from driftbook.store.page.rendering import render
from driftbook.store.page.sheet import Asked, sheet
from driftbook.store.sql import query

_RUNS_OFFERED = 30


def first_sheet(request: Request) -> Response:
    """All series."""
    as_of = _moment(request)
    with known(_book(request), as_of) as book:
        told = {"sheet": overview(book), "runs": runs(book), "mailed": False}
        return HTMLResponse(render("first.html", book, Served(as_of), **told))


def series_sheet(request: Request) -> Response:
    """One series."""
    as_of, series = _moment(request), request.query_params.get("name", "")
    with known(_book(request), as_of) as book:
        asked = Asked(_level(request), _run(request, "from"), _run(request, "to"))
        found = sheet(book, series, asked)
        if found is None:
            raise HTTPException(404, f"The book knows no series {series!r} at that moment.")
        told = {"one": found, "runs": runs(book), "mailed": False, "path": _book(request).name}
        return HTMLResponse(render("series.html", book, Served(as_of), **told))


def csv_file(request: Request) -> Response:
    """The data behind a table or a chart."""
    kind = request.path_params["kind"]
    with known(_book(request), _moment(request)) as book:
        text = csv_of(book, kind, request.query_params.get("name"))
    name = f'attachment; filename="{kind}.csv"'
    return Response(text, media_type="text/csv; charset=utf-8", headers={"content-disposition": name})


def guide_list(_: Request) -> Response:
    """The pages of the guide."""
    return HTMLResponse(render("guide.html", None, Served(None), pages=guide.pages(), text=None, mailed=False))


def guide_page(request: Request) -> Response:
    """One page of the guide."""
    found = guide.page(request.path_params["name"])
    if found is None:
        raise HTTPException(404, "The guide has no such page.")
    return HTMLResponse(render("guide.html", None, Served(None), pages=[], text=found, mailed=False))


def newest(request: Request) -> Response:
    """The number of the newest run, so that an open page can say that there is one."""
    with known(_book(request)) as book:
        return JSONResponse({"run": book.newest})


def sorry(_: Request, error: Exception) -> Response:
    """An error as one sentence."""
    sentence = error.detail if isinstance(error, HTTPException) else str(error)
    status = _status(error)
    shown = sentence[:1].upper() + sentence[1:]
    return HTMLResponse(render("sorry.html", None, Served(None), sentence=shown, mailed=False), status)


def runs(book: Known) -> list[tuple[int, str, object]]:
    """The newest runs, for the moment picker."""
    return book.con.execute(query("page_runs"), {"most": _RUNS_OFFERED}).fetchall()


def _status(error: Exception) -> int:
    if isinstance(error, HTTPException):
        return error.status_code
    if isinstance(error, UsageError):
        return 400
    return 503 if isinstance(error, BookLocked) else 500


def _book(request: Request) -> Path:
    book: Path = request.app.state.book
    return book


def _moment(request: Request) -> str | None:
    return request.query_params.get("as_of") or None


def _level(request: Request) -> float | None:
    text = request.query_params.get("level", "")
    if not text:
        return None
    try:
        level = float(text)
    except ValueError:
        raise UsageError(f"{text!r} is no level; write a number such as 180.5.") from None
    if abs(level) < float("inf"):
        return level
    raise UsageError(f"{text!r} is no level; write a number such as 180.5.")


def _run(request: Request, name: str) -> str | None:
    text = request.query_params.get(name, "")
    return f"run:{text}" if text.isdecimal() else None
