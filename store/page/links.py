"""Where a sheet leads: to other addresses of the served page, or to places within a mailed file."""

from __future__ import annotations

from base64 import b64encode
from collections.abc import Callable
from typing import Protocol
from urllib.parse import urlencode


class Links(Protocol):
    """What templates ask for."""

    def home(self) -> str:
        """The first sheet."""

    def sheet(self, series: str) -> str:
        """A series' sheet; empty if there is none to go to."""

    def csv(self, kind: str, series: str | None = None) -> str:
        """The data behind something."""


class Served:
    """Addresses of the served page, which keep the past moment."""

    def __init__(self, as_of: str | None) -> None:
        self._moment = {"as_of": as_of} if as_of else {}

    def home(self) -> str:
        """The first sheet."""
        return self._address("/", {})

    def sheet(self, series: str) -> str:
        """A series' sheet."""
        return self._address("/series", {"name": series})

    def csv(self, kind: str, series: str | None = None) -> str:
        """The data behind something."""
        return self._address(f"/csv/{kind}.csv", {"name": series} if series is not None else {})

    def _address(self, path: str, told: dict[str, str]) -> str:
        asked = urlencode({**told, **self._moment}, errors="surrogatepass")
        return f"{path}?{asked}" if asked else path


class Mailed:
    """Places within one file; data stand in the link itself."""

    def __init__(self, series: list[str], csv: Callable[[str, str | None], str]) -> None:
        self._place = {name: f"#sheet-{at}" for at, name in enumerate(series)}
        self._csv = csv

    def home(self) -> str:
        """The first sheet."""
        return "#first"

    def sheet(self, series: str) -> str:
        """A series' sheet, if the file has it."""
        return self._place.get(series, "")

    def csv(self, kind: str, series: str | None = None) -> str:
        """The data themselves."""
        return "data:text/csv;charset=utf-8;base64," + b64encode(self._csv(kind, series).encode()).decode()
